import { describe, expect, it } from 'vitest';
import { dateWords, dayWords, lengthWords } from './clock';

describe('times in words', () => {
  it('tell a length in the units that matter', () => {
    const told: [number, string][] = [
      [0, '0.0 s'],
      [4.24, '4.2 s'],
      [9.97, '10 s'],
      [59.6, '1 min'],
      [185, '3 min 05 s'],
      [3599.6, '1 h'],
      [8040, '2 h 14 min'],
      [86_399, '1 d'],
      [273_600, '3 d 4 h'],
    ];
    for (const [length_s, words] of told) expect(lengthWords(length_s)).toBe(words);
  });

  it('tell a day of this place', () => {
    // 1 December 2026 is a Tuesday (Zeller's congruence).
    const noon = new Date(2026, 11, 1, 12);
    expect(dateWords(noon)).toBe('1 Dec 2026');
    expect(dayWords(noon)).toBe('Tue 1 Dec 2026');
  });
});
