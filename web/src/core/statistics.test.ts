import { expect, it } from 'vitest';
import { spreadOf } from './statistics';

it('has mean and scatter without loss of digits far from zero', () => {
  // Values 1e9 + {4, 7, 13, 16}: mean 1e9 + 10, sample variance 30 (a classic of numerical
  // analysis, from memory; exact by hand: (36 + 9 + 9 + 36) / 3 = 30).
  const spread = spreadOf([4, 7, null, 13, 16].map((v) => (v === null ? null : 1e9 + v)));
  expect(spread).toEqual({ n: 4, mean: 1e9 + 10, sd: Math.sqrt(30) });
  expect(spreadOf([1])).toBeNull();
});
