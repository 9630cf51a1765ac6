import { describe, expect, it } from 'vitest';
import {
  decimalsOfStep,
  graduation,
  roundSpan,
  ruleGraduation,
  step125,
  SteppedRange,
  ticks,
} from './scale';

describe('1-2-5 steps', () => {
  it('gives the smallest that is enough', () => {
    const cases: [number, number][] = [
      [1, 1],
      [1.01, 2],
      [2, 2],
      [2.1, 5],
      [5.1, 10],
      [0.03, 0.05],
      [0.011, 0.02],
      [700, 1000],
    ];
    for (const [least, step] of cases) expect(step125(least)).toBe(step);
  });

  it('is between the wish and two and a half times it, at every decade', () => {
    for (let exponent = -6; exponent <= 6; exponent++) {
      for (let factor = 1; factor < 10; factor += 0.37) {
        const least = factor * 10 ** exponent;
        const ratio = step125(least) / least;
        expect(ratio).toBeGreaterThan(1 - 1e-9);
        expect(ratio).toBeLessThanOrEqual(2.5 + 1e-9);
        const finer = roundSpan(least) / least;
        expect(finer).toBeGreaterThan(1 - 1e-9);
        expect(finer).toBeLessThanOrEqual(1.5 + 1e-9);
      }
    }
  });

  it('refuses what is no length', () => {
    for (const bad of [0, -1, Number.NaN, Infinity]) expect(() => step125(bad)).toThrow(RangeError);
  });

  it('writes multiples in full and no more', () => {
    expect(decimalsOfStep(0.05)).toBe(2);
    expect(decimalsOfStep(20)).toBe(0);
    expect(decimalsOfStep(1e-3)).toBe(3);
  });

  it('places marks on exact multiples, the ends with them, zero without a sign', () => {
    expect(ticks(-0.3, 0.3, 0.1)).toEqual([-0.3, -0.2, -0.1, 0, 0.1, 0.2, 0.3]);
    expect(Object.is(ticks(-1, 1, 1)[1], 0)).toBe(true);
    expect(ticks(0.1, 0.9, 1)).toEqual([]);
  });

  it('engraves halves of 1 and 2, fifths of 5', () => {
    expect(graduation(40, 8)).toEqual({ numbered: 5, half: 1, fine: 0.5 });
    expect(graduation(10, 10)).toEqual({ numbered: 1, half: 0.5, fine: 0.1 });
  });

  it('numbers the ends of a rule, with room for each number', () => {
    for (const range of [0.01, 0.2, 0.5, 1, 2, 5, 10, 20, 50, 1000]) {
      for (const length_px of [300, 560, 700]) {
        const { numbered } = ruleGraduation(range, length_px, 52);
        expect(range / numbered).toBeCloseTo(Math.round(range / numbered), 9);
        expect((numbered * length_px) / (2 * range)).toBeGreaterThanOrEqual(52 - 1e-9);
      }
    }
  });
});

describe('a stepped range', () => {
  it('opens at once', () => {
    const range = new SteppedRange(1);
    expect(range.next(0.2, 0)).toBe(1);
    expect(range.next(12, 0.1)).toBe(20);
  });

  it('closes only after a while inside the smaller one', () => {
    const range = new SteppedRange(1, 4);
    range.next(12, 0);
    expect(range.next(3, 1)).toBe(20);
    expect(range.next(3, 4.9)).toBe(20);
    expect(range.next(3, 5)).toBe(5);
  });

  it('begins the wait again after each return', () => {
    const range = new SteppedRange(1, 4);
    range.next(12, 0);
    range.next(3, 1);
    range.next(18, 3);
    expect(range.next(3, 6)).toBe(20);
  });

  it('keeps its place while there is no value', () => {
    const range = new SteppedRange(1);
    range.next(12, 0);
    expect(range.next(null, 100)).toBe(20);
  });
});
