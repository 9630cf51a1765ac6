import { fromArcsec, type AngleUnit } from './units';
import { gapsOf, lanesAt, type Lanes } from './lanes';
import type { Series } from './runs';
import { fieldPlace } from './field';
import { extentOf, Windows } from './windows';

/**
 * A run for the plot: means of X and Y, then lowest and highest of X, lowest and highest of Y, all
 * in lane heights. The scale is the one that just holds what is shown.
 */
export function envelopeOf(series: Series, unit: AngleUnit, most: number): Lanes {
  const place = fieldPlace(unit, null);
  const of = (column: (number | null)[]): (number | null)[] =>
    column.map((value) => (value === null ? null : fromArcsec(value, unit)));
  const x = [of(series.x_mean_arcsec), of(series.x_min_arcsec), of(series.x_max_arcsec)] as const;
  const y = [of(series.y_mean_arcsec), of(series.y_min_arcsec), of(series.y_max_arcsec)] as const;
  const frame = new Windows([1, 1]).next([extentOf(x.flat()), extentOf(y.flat())], place.least, 0);
  const lanes = lanesAt(frame, place, most);
  const [x_mean, x_min, x_max] = x.map((column) => column.map(lanes.ofX));
  const [y_mean, y_min, y_max] = y.map((column) => column.map(lanes.ofY));
  return {
    data: [series.t_s, ...[x_mean, y_mean, x_min, x_max, y_min, y_max].map((c) => c ?? [])],
    marks: lanes.marks,
    span: frame.span,
    low: lanes.low,
    gaps: gapsOf(series.t_s, series.x_min_arcsec),
  };
}

/** Values with nothing on either side, which no line would show. */
export function alone(column: ArrayLike<number | null | undefined>): number[] {
  const there = (i: number): boolean => (column[i] ?? null) !== null;
  return Array.from({ length: column.length }, (_, i) => i).filter(
    (i) => there(i) && !there(i - 1) && !there(i + 1),
  );
}
