/** The smallest of …, 1, 2, 5, 10, 20, 50, … that is not below `least` (> 0). */
export function step125(least: number): number {
  if (!(least > 0) || !Number.isFinite(least))
    throw new RangeError(`need a step > 0, got ${least}`);
  const exponent = Math.floor(Math.log10(least) + 1e-9);
  for (const factor of [1, 2, 5, 10]) {
    const step = power(factor, exponent);
    if (step >= least * (1 - 1e-9)) return step;
  }
  return power(1, exponent + 1);
}

/** Exact decimal fractions: 5e-3, not 0.005000000000000001. */
function power(factor: number, exponent: number): number {
  return Number(`${factor}e${exponent}`);
}

/** Decimals that write every multiple of a 1-2-5 step in full. */
export function decimalsOfStep(step: number): number {
  return Math.max(0, -Math.floor(Math.log10(step) + 1e-9));
}

/** The multiples of `step` within [low, high], as whole-number multiples so that 0 is 0. */
export function ticks(low: number, high: number, step: number): number[] {
  const first = Math.ceil(low / step - 1e-9);
  const last = Math.floor(high / step + 1e-9);
  const decimals = decimalsOfStep(step);
  return Array.from(
    { length: Math.max(0, last - first + 1) },
    (_, i) => Number(((first + i) * step).toFixed(decimals)) || 0,
  );
}

/** How fine a 1-2-5 step is engraved: halves of 1 and 2, fifths of 5, and tenths of each. */
export interface Graduation {
  numbered: number;
  half: number;
  fine: number;
}

/** Graduation for a length `span` with at most `most` numbered marks on it. */
export function graduation(span: number, most: number): Graduation {
  const numbered = step125(span / most);
  const leading = Math.round(numbered / 10 ** Math.floor(Math.log10(numbered) + 1e-9));
  return { numbered, half: numbered / (leading === 5 ? 5 : 2), fine: numbered / 10 };
}

/**
 * Graduation of a rule from -range to +range whose ends carry numbers: the finest 1-2-5 step that
 * divides the range and leaves each number `room_px` on `length_px`.
 */
export function ruleGraduation(range: number, length_px: number, room_px: number): Graduation {
  const whole = (v: number): boolean => Math.abs(v - Math.round(v)) < 1e-6;
  let numbered = step125((2 * range * room_px) / length_px);
  while (numbered < range && !whole(range / numbered)) numbered = step125(numbered * 1.01);
  return graduation(numbered, 1);
}

const SPANS = [1, 1.5, 2, 3, 4, 5, 7, 10];

/** The smallest round length not below `least` (> 0): finer steps than 1-2-5, to waste less room. */
export function roundSpan(least: number): number {
  const decade = 10 ** Math.floor(Math.log10(least) + 1e-9);
  const factor = SPANS.find((span) => span * decade >= least * (1 - 1e-9)) ?? 10;
  return factor * decade;
}

/**
 * The half range of a scale around zero, 1-2-5. Opens at once when the value leaves it, closes
 * when the value has stayed inside the smaller one for `wait_s`.
 */
export class SteppedRange {
  private range: number | null = null;
  private since_s: number | null = null;

  constructor(
    private readonly least: number,
    private readonly wait_s = 4,
  ) {}

  next(value: number | null, t_s: number): number {
    if (value === null || !Number.isFinite(value)) return this.range ?? step125(this.least);
    const wish = step125(Math.max(this.least, Math.abs(value) / 0.95));
    if (this.range === null || wish > this.range) {
      this.range = wish;
      this.since_s = null;
    } else if (step125(Math.max(this.least, Math.abs(value) / 0.75)) < this.range) {
      this.since_s ??= t_s;
      if (t_s - this.since_s >= this.wait_s) {
        this.range = step125(Math.max(this.least, Math.abs(value) / 0.75));
        this.since_s = null;
      }
    } else {
      this.since_s = null;
    }
    return this.range;
  }
}
