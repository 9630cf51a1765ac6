import { expect, it } from 'vitest';
import { armEnds } from './arms';

// Angles positive clockwise on screen: upright arm along (-sin a, cos a), level along (cos a, sin a).
it('draws the arms through the crossing at their angles', () => {
  const { upright, level } = armEnds({ x: 100, y: 50 }, 30, 90, 10);
  const numbers = (d: string | null): number[] =>
    (d ?? '').split(/[ML ]/).filter(Boolean).map(Number);
  const [x0 = 0, y0 = 0, x1 = 0, y1 = 0] = numbers(upright);
  expect([(x0 + x1) / 2, (y0 + y1) / 2]).toEqual([100, 50]);
  expect(x1 - 100).toBeCloseTo(-10 * Math.sin(Math.PI / 6), 9);
  expect(y1 - 50).toBeCloseTo(10 * Math.cos(Math.PI / 6), 9);
  expect(numbers(level)[2]).toBeCloseTo(100, 9);
  expect(armEnds({ x: 0, y: 0 }, null, 1, 10).upright).toBeNull();
});
