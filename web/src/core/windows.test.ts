import { describe, expect, it } from 'vitest';
import { extentOf, frameOf, Windows } from './windows';

describe('windows', () => {
  it('hold what they are given, at one scale', () => {
    const windows = new Windows([4 / 3, 1]);
    const frame = windows.next(
      [
        [3, 5],
        [-9, -8],
      ],
      0.1,
      0,
    );
    expect(frame.low[0]).toBeLessThanOrEqual(3);
    expect((frame.low[0] ?? 0) + (frame.span * 4) / 3).toBeGreaterThanOrEqual(5);
    expect(frame.low[1]).toBeLessThanOrEqual(-9);
    expect((frame.low[1] ?? 0) + frame.span).toBeGreaterThanOrEqual(-8);
  });

  it('stand still while what they hold moves inside', () => {
    const windows = new Windows([1]);
    const first = windows.next([[0, 1]], 0.1, 0);
    expect(windows.next([[0.05, 1.05]], 0.1, 1)).toEqual(first);
  });

  it('open at once and close after a while', () => {
    const windows = new Windows([1], 4);
    const small = windows.next([[0, 1]], 0.1, 0).span;
    const large = windows.next([[0, 10]], 0.1, 1).span;
    expect(large).toBeGreaterThan(10);
    expect(windows.next([[0, 1]], 0.1, 2).span).toBe(large);
    expect(windows.next([[0, 1]], 0.1, 6.1).span).toBeLessThan(2 * small);
  });

  it('never show less than asked for', () => {
    expect(new Windows([1]).next([[1, 1]], 0.5, 0).span).toBeGreaterThanOrEqual(0.5);
    expect(extentOf([null, null])).toBeNull();
  });

  it('of a whole hold it in the middle, without room to spare on the longer side', () => {
    const wide = [
      [-400, 400],
      [-300, 300],
    ] as const;
    expect(frameOf(wide, [4 / 3, 1])).toEqual({ span: 600, low: [-400, -300] });
    expect(frameOf(wide, [1, 1])).toEqual({ span: 800, low: [-400, -400] });
  });
});
