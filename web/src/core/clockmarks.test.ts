import { describe, expect, it } from 'vitest';
import { clockMarks } from './clockmarks';

const START_MS = Date.UTC(2026, 11, 1, 22, 40, 30);
const texts = (from_s: number, to_s: number, ahead_min: number, most = 6): string[] =>
  clockMarks(START_MS, from_s, to_s, most, ahead_min).map((mark) => mark.text);

describe('marks of the clock', () => {
  it('stand on round times here, midnight under its date', () => {
    expect(texts(0, 3 * 3600, 0)).toEqual(['23:00', '23:30', '2 Dec', '00:30', '01:00', '01:30']);
    expect(texts(0, 3600, 330, 4)).toEqual(['04:15', '04:30', '04:45', '05:00']);
  });

  it('stand where they say', () => {
    const [first] = clockMarks(START_MS, 0, 3600, 4, 0);
    expect(first).toEqual({ at_s: 270, text: '22:45' });
  });

  it('go down to tenths and up to days', () => {
    expect(texts(0, 1, 0)).toEqual([
      '22:40:30.0',
      '22:40:30.2',
      '22:40:30.4',
      '22:40:30.6',
      '22:40:30.8',
      '22:40:31.0',
    ]);
    expect(texts(0, 20 * 86_400, 0).length).toBeLessThan(8);
    expect(texts(0, 900 * 86_400, 0).length).toBeLessThan(9);
  });
});
