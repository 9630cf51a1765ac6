import type { Readings } from './protocol';

export interface Row {
  seq: number;
  t_s: number;
  x_arcsec: number | null;
  y_arcsec: number | null;
  x_px: number | null;
  y_px: number | null;
  /** Nobody has a doubt about it. */
  good: boolean;
}

export type Series = 'x_arcsec' | 'y_arcsec' | 'x_px' | 'y_px';

/**
 * The readings of the last `span_s` seconds as columns. null is drawn as a gap; where rows are
 * further apart than `gap_s` a row of nulls is put between, so that no line bridges what nobody
 * measured.
 */
export class Columns {
  readonly t_s: number[] = [];
  readonly good: boolean[] = [];
  private readonly series: Record<Series, (number | null)[]> = {
    x_arcsec: [],
    y_arcsec: [],
    x_px: [],
    y_px: [],
  };
  private newest_seq = -1;

  constructor(readonly span_s: number) {}

  get lastSeq(): number {
    return this.newest_seq;
  }

  get length(): number {
    return this.t_s.length;
  }

  of(name: Series): readonly (number | null)[] {
    return this.series[name];
  }

  /** Adds one row; one that is not newer than the last is refused (returns false). */
  push(row: Row, gap_s: number): boolean {
    const before_s = this.t_s.at(-1);
    if (row.seq <= this.newest_seq || (before_s !== undefined && row.t_s <= before_s)) return false;
    if (before_s !== undefined && row.t_s - before_s > gap_s) {
      this.add((before_s + row.t_s) / 2, null, null, null, null, false);
    }
    this.add(row.t_s, row.x_arcsec, row.y_arcsec, row.x_px, row.y_px, row.good);
    this.newest_seq = row.seq;
    return true;
  }

  /** Rows of a message that are newer than what is here and before `before_seq`; returns how many were taken. */
  append(readings: Readings, gap_s: number, before_seq = Infinity): number {
    let taken = 0;
    for (let i = 0; i < readings.seq.length; i++) {
      if ((readings.seq[i] ?? 0) >= before_seq) break;
      taken += Number(this.push(rowOf(readings, i), gap_s));
    }
    this.prune();
    return taken;
  }

  clear(): void {
    for (const column of this.all()) column.length = 0;
    this.newest_seq = -1;
  }

  /** Index of the first row at or after `t_s`. */
  indexAt(t_s: number): number {
    let low = 0;
    let high = this.t_s.length;
    while (low < high) {
      const middle = (low + high) >> 1;
      if ((this.t_s[middle] ?? Infinity) < t_s) low = middle + 1;
      else high = middle;
    }
    return low;
  }

  private add(
    t_s: number,
    x_arcsec: number | null,
    y_arcsec: number | null,
    x_px: number | null,
    y_px: number | null,
    good: boolean,
  ): void {
    this.t_s.push(t_s);
    this.series.x_arcsec.push(x_arcsec);
    this.series.y_arcsec.push(y_arcsec);
    this.series.x_px.push(x_px);
    this.series.y_px.push(y_px);
    this.good.push(good);
  }

  /** Cuts off the oldest tenth at a time: cutting at every row would move the arrays each time. */
  private prune(): void {
    const newest_s = this.t_s.at(-1) ?? 0;
    if (newest_s - (this.t_s[0] ?? newest_s) < 1.1 * this.span_s) return;
    const count = this.indexAt(newest_s - this.span_s);
    for (const column of this.all()) column.splice(0, count);
  }

  private all(): unknown[][] {
    return [this.t_s, this.good, ...Object.values(this.series)];
  }
}

export function rowOf(readings: Readings, i: number): Row {
  return {
    seq: readings.seq[i] ?? -1,
    t_s: readings.t_s[i] ?? Number.NaN,
    x_arcsec: readings.x_arcsec[i] ?? null,
    y_arcsec: readings.y_arcsec[i] ?? null,
    x_px: readings.x_px[i] ?? null,
    y_px: readings.y_px[i] ?? null,
    good: readings.quality[i]?.length === 0,
  };
}
