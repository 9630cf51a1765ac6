import { describe, expect, it } from 'vitest';
import { drawMirror, exaggeration, type Point } from './mirror';
import { ARCSEC_PER_RAD } from './units';

const TEN_DEG = (10 / 180) * Math.PI * ARCSEC_PER_RAD;

describe('the drawing of the mirror', () => {
  const heights = (
    x: number,
    y: number,
  ): { left: number; right: number; top: number; bottom: number } => {
    const { front } = drawMirror(x, y);
    const at = (i: number): Point => front[i] ?? [Number.NaN, Number.NaN];
    const [tl, tr, br, bl] = [at(0), at(1), at(2), at(3)];
    const length = (a: Point, b: Point): number => Math.hypot(a[0] - b[0], a[1] - b[1]);
    return {
      left: length(tl, bl),
      right: length(tr, br),
      top: length(tl, tr),
      bottom: length(bl, br),
    };
  };

  // The axes of the project; in perspective what is nearer is larger.
  it('shows the right edge larger for X > 0 and the top edge larger for Y > 0', () => {
    const turned = heights(TEN_DEG, 0);
    expect(turned.right).toBeGreaterThan(turned.left * 1.05);
    expect(turned.top).toBeCloseTo(turned.bottom, 12);
    const leaning = heights(0, TEN_DEG);
    expect(leaning.top).toBeGreaterThan(leaning.bottom * 1.05);
    expect(leaning.left).toBeCloseTo(leaning.right, 12);
  });

  it('is a square of half side 1 without tilt', () => {
    expect(heights(0, 0)).toEqual({ left: 2, right: 2, top: 2, bottom: 2 });
  });

  it('is exaggerated by a round factor', () => {
    expect([1, 2, 5, 20, 500].map(exaggeration)).toEqual([100_000, 50_000, 20_000, 5_000, 200]);
  });
});
