import { describe, expect, it } from 'vitest';
import { pathOf, rangeOf } from './focus';

describe('the trace of the focus', () => {
  it('is drawn between round values that hold all of it', () => {
    expect(rangeOf([2.31, null, 4.72])).toEqual([2, 5]);
    expect(rangeOf([])).toEqual([0, 1]);
    const [low, high] = rangeOf([3, 3]);
    expect(low).toBeLessThanOrEqual(3);
    expect(high).toBeGreaterThan(low);
    const [from, to] = rangeOf([3, 3.001]);
    expect(to - from).toBeGreaterThanOrEqual(0.15);
  });

  it('leaves gaps open', () => {
    expect(pathOf([0, 1, null, 1, 0], [0, 1], 100, 10)).toBe(
      'M0.0 10.0L25.0 0.0M75.0 0.0L100.0 10.0',
    );
  });
});
