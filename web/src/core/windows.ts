import { roundSpan } from './scale';

export type Extent = readonly [low: number, high: number];

export interface Frame {
  /** Length shown by a window of share 1, a round number. */
  span: number;
  /** Lower end of each window; it shows `span` times its share from there. */
  low: number[];
}

/**
 * Windows that hold what moves, all at one scale, so that equal steps look equal. They open or
 * shift at once when something would leave, close after `wait_s` of needing less, and stand on
 * round places, so that the marks beside them do not crawl.
 */
export class Windows {
  private frame: Frame | null = null;
  private since_s: number | null = null;

  constructor(
    private readonly shares: readonly number[],
    private readonly wait_s = 4,
  ) {}

  /** `least`: the smallest span wanted (> 0), a few times the noise. */
  next(extents: readonly (Extent | null)[], least: number, t_s: number): Frame {
    const need = Math.max(
      least,
      ...extents.map((extent, i) => (extent ? (extent[1] - extent[0]) / this.share(i) : 0)),
    );
    const roomy = roundSpan(need / 0.7);
    const frame = this.frame;
    if (frame === null || need > 0.9 * frame.span) {
      this.since_s = null;
      return (this.frame = this.around(extents, roomy, null));
    }
    if (roundSpan(need / 0.55) < frame.span) {
      this.since_s ??= t_s;
      if (t_s - this.since_s >= this.wait_s) {
        this.since_s = null;
        return (this.frame = this.around(extents, roundSpan(need / 0.55), null));
      }
    } else {
      this.since_s = null;
    }
    return (this.frame = this.around(extents, frame.span, frame));
  }

  private around(extents: readonly (Extent | null)[], span: number, kept: Frame | null): Frame {
    const low = this.shares.map((share, i) => {
      const extent = extents[i] ?? null;
      const length = span * share;
      const old = kept?.low[i];
      if (extent === null) return old ?? -length / 2;
      const edge = 0.03 * length;
      if (old !== undefined && extent[0] >= old + edge && extent[1] <= old + length - edge)
        return old;
      const grid = span / 10;
      return Math.round(((extent[0] + extent[1]) / 2 - length / 2) / grid) * grid;
    });
    return { span, low };
  }

  private share(i: number): number {
    return this.shares[i] ?? 1;
  }
}

/** The smallest windows that hold the extents, each in the middle of its own. */
export function frameOf(extents: readonly Extent[], shares: readonly number[]): Frame {
  const share = (i: number): number => shares[i] ?? 1;
  const span = Math.max(...extents.map(([low, high], i) => (high - low) / share(i)));
  return { span, low: extents.map(([low, high], i) => (low + high - span * share(i)) / 2) };
}

/** Lowest and highest of the numbers that are there, null for none. */
export function extentOf(values: Iterable<number | null>): Extent | null {
  let low = Infinity;
  let high = -Infinity;
  for (const value of values) {
    if (value === null) continue;
    if (value < low) low = value;
    if (value > high) high = value;
  }
  return low <= high ? [low, high] : null;
}
