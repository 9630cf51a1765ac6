import type { Columns, Series } from './columns';
import type { Zero } from './protocol';
import { fromArcsec, type Unit } from './units';

/** How a row becomes a place in the field: in the unit shown, from the zero in use. */
export interface Place {
  xSeries: Series;
  ySeries: Series;
  x(value: number): number;
  y(value: number): number;
  /** Pixel rows grow downwards, tilts upwards. */
  yDown: boolean;
  signed: boolean;
  /** The smallest window worth drawing. */
  least: number;
}

export function fieldPlace(unit: Unit, zero: Zero | null): Place {
  if (unit === 'px') {
    const same = (v: number): number => v;
    return {
      xSeries: 'x_px',
      ySeries: 'y_px',
      x: same,
      y: same,
      yDown: true,
      signed: false,
      least: 0.01,
    };
  }
  return {
    xSeries: 'x_arcsec',
    ySeries: 'y_arcsec',
    x: (v) => fromArcsec(v - (zero?.x_arcsec ?? 0), unit),
    y: (v) => fromArcsec(v - (zero?.y_arcsec ?? 0), unit),
    yDown: false,
    signed: true,
    least: fromArcsec(0.01, unit),
  };
}

export interface Ink {
  t_s: number[];
  x: (number | null)[];
  y: (number | null)[];
}

const MOST_POINTS = 1800;

/**
 * The way between two times as the display shows it: each point is the mean over the `window_s`
 * before it of the readings without a doubt, or the reading alone where there are none. Thinned to
 * what a small drawing can show; the newest row always.
 */
export function inkOf(
  columns: Columns,
  place: Place,
  from_s: number,
  to_s: number,
  window_s: number,
): Ink {
  const last = Math.min(columns.length, columns.indexAt(to_s + 1e-6));
  const bin_s = (to_s - from_s) / MOST_POINTS;
  const xs = columns.of(place.xSeries);
  const ys = columns.of(place.ySeries);
  const ink: Ink = { t_s: [], x: [], y: [] };
  const mean = { first: columns.indexAt(from_s - window_s), n: 0, x: 0, y: 0 };
  const count = (i: number, by: 1 | -1): void => {
    const [x, y] = [xs[i] ?? null, ys[i] ?? null];
    if (!columns.good[i] || x === null || y === null) return;
    mean.n += by;
    mean.x += by * x;
    mean.y += by * y;
  };
  // The first row of each bin of absolute time: the same rows are taken again from frame to frame,
  // and the trail does not shimmer.
  let before = Number.NaN;
  for (let i = mean.first; i < last; i++) {
    const t_s = columns.t_s[i] ?? 0;
    count(i, 1);
    while (mean.first < i && (columns.t_s[mean.first] ?? 0) <= t_s - window_s) {
      count(mean.first++, -1);
    }
    if (t_s < from_s) continue;
    const bin = Math.floor(t_s / bin_s);
    const [x, y] = [xs[i] ?? null, ys[i] ?? null];
    const gap = x === null && ink.x.at(-1) !== null;
    if (bin !== before || gap || i === last - 1) {
      ink.t_s.push(t_s);
      ink.x.push(x === null ? null : place.x(mean.n > 0 ? mean.x / mean.n : x));
      ink.y.push(y === null ? null : place.y(mean.n > 0 ? mean.y / mean.n : y));
    }
    before = bin;
  }
  return ink;
}

const PIECES = 10;

/**
 * The way as SVG paths, the oldest tenth of the time first, so that the ink can thin towards the
 * past; each begins where the one before ends, and gaps stay open.
 */
export function strokesOf(
  ink: Ink,
  from_s: number,
  to_s: number,
  across: (x: number) => number,
  down: (y: number) => number,
): string[] {
  const paths: string[] = Array.from({ length: PIECES }, () => '');
  let before: { piece: number; d: string } | null = null;
  for (let i = 0; i < ink.t_s.length; i++) {
    const x = ink.x[i] ?? null;
    const y = ink.y[i] ?? null;
    if (x === null || y === null) {
      before = null;
      continue;
    }
    const share = ((ink.t_s[i] ?? from_s) - from_s) / (to_s - from_s);
    const piece = Math.min(PIECES - 1, Math.max(0, Math.floor(share * PIECES)));
    const d = `${across(x).toFixed(1)} ${down(y).toFixed(1)}`;
    paths[piece] += before?.piece === piece ? `L${d}` : before ? `M${before.d}L${d}` : `M${d}`;
    before = { piece, d };
  }
  return paths;
}
