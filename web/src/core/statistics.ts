export interface Spread {
  n: number;
  mean: number;
  /** Standard deviation of the values, n - 1. */
  sd: number;
}

/** Mean and scatter of the values that are there; null for fewer than two. */
export function spreadOf(values: Iterable<number | null>): Spread | null {
  // Welford's recurrence (B. P. Welford, 1962): no loss of digits for a small scatter far from zero.
  let n = 0;
  let mean = 0;
  let sum2 = 0;
  for (const value of values) {
    if (value === null || !Number.isFinite(value)) continue;
    n += 1;
    const off = value - mean;
    mean += off / n;
    sum2 += off * (value - mean);
  }
  return n < 2 ? null : { n, mean, sd: Math.sqrt(sum2 / (n - 1)) };
}
