import type { Columns } from './columns';
import type { Place } from './field';
import { decimalsOfStep, graduation, ticks } from './scale';
import { plain, signed } from './numbers';
import { extentOf, Windows, type Frame } from './windows';

/** Two lanes, X above Y, at one scale: a lane is 1 high, with a strip of ground between them. */
const BETWEEN = 0.22;
export const LANES_TOP = 2 + BETWEEN;

export interface Lanes {
  /** Columns for the plot: time, X and Y in lane heights; null where a gap is to be left. */
  data: [number[], ...(number | null)[][]];
  marks: { at: number; label: string; zero: boolean }[];
  span: number;
  low: [x: number, y: number];
  gaps: Gap[];
}

/** A stretch without a number, and what was missing in it. */
export interface Gap {
  from_s: number;
  to_s: number;
  missing: 'reading' | 'scale';
}

export class LaneMaker {
  private readonly windows = new Windows([1, 1]);

  make(
    columns: Columns,
    place: Place,
    from_s: number,
    to_s: number,
    grain: number,
    now_s: number,
    most = 4,
  ): Lanes {
    const first = Math.max(0, columns.indexAt(from_s) - 1);
    const last = Math.min(columns.length, columns.indexAt(to_s) + 1);
    const t_s = columns.t_s.slice(first, last);
    const xs = valuesOf(columns.of(place.xSeries), first, last, place.x);
    const ys = valuesOf(columns.of(place.ySeries), first, last, place.y);
    const extents = [extentOf(xs), extentOf(ys)];
    const frame = this.windows.next(extents, Math.max(10 * grain, place.least), now_s);
    const lanes = lanesAt(frame, place, most);
    const empty = extents.every((extent) => extent === null);
    return {
      data: [t_s, xs.map(lanes.ofX), ys.map(lanes.ofY)],
      // A scale beside nothing would be a number nobody measured.
      marks: empty ? [] : lanes.marks,
      span: frame.span,
      low: lanes.low,
      gaps: gapsOf(t_s, xs, to_s, columns.of('x_px').slice(first, last)),
    };
  }
}

/** Where the lanes put a value when they stand at `frame`, and the marks beside them. */
export function lanesAt(
  frame: Frame,
  place: Place,
  most: number,
): {
  ofX: (value: number | null) => number | null;
  ofY: (value: number | null) => number | null;
  low: [number, number];
  marks: Lanes['marks'];
} {
  const [x_low = 0, y_low = 0] = frame.low;
  const upper = 1 + BETWEEN;
  return {
    ofX: (v) => (v === null ? null : upper + (v - x_low) / frame.span),
    ofY: (v) => (v === null ? null : (v - y_low) / frame.span),
    low: [x_low, y_low],
    marks: [
      ...marksOf(x_low, frame.span, upper, place, most),
      ...marksOf(y_low, frame.span, 0, place, most),
    ],
  };
}

function valuesOf(
  column: readonly (number | null)[],
  first: number,
  last: number,
  convert: (value: number) => number,
): (number | null)[] {
  return column.slice(first, last).map((value) => (value === null ? null : convert(value)));
}

function marksOf(
  low: number,
  span: number,
  base: number,
  place: Place,
  most: number,
): Lanes['marks'] {
  const step = graduation(span, most).numbered;
  const decimals = decimalsOfStep(step);
  return ticks(low, low + span, step).map((value) => ({
    at: base + (value - low) / span,
    label: value === 0 ? '0' : place.signed ? signed(value, decimals) : plain(value, decimals),
    zero: value === 0,
  }));
}

/**
 * Stretches of nulls, up to the values beside them. `to_s`: where the time shown ends; where there
 * is a position among `positions`, it was the scale that was missing.
 */
export function gapsOf(
  t_s: readonly number[],
  values: readonly (number | null)[],
  to_s = t_s.at(-1) ?? 0,
  positions: readonly (number | null)[] = [],
): Gap[] {
  const gaps: Gap[] = [];
  let missing = null as Gap['missing'] | null;
  let from_s = 0;
  const turn = (next: typeof missing, at_s: number): void => {
    if (missing !== null) gaps.push({ from_s, to_s: at_s, missing });
    [missing, from_s] = [next, at_s];
  };
  t_s.forEach((at_s, i) => {
    const there = (positions[i] ?? null) !== null;
    const next = (values[i] ?? null) !== null ? null : there ? 'scale' : 'reading';
    if (next !== missing) turn(next, next === null ? at_s : (t_s[i - 1] ?? at_s));
  });
  const end_s = t_s.at(-1);
  if (end_s === undefined) return gaps;
  if (to_s - end_s > END_GAP_S && missing !== 'reading') turn('reading', end_s);
  turn(null, Math.max(end_s, to_s));
  return gaps;
}

/** Readings come in lumps: only a longer white end is called a gap. */
const END_GAP_S = 0.5;

/** Words for times on the axis: how long ago while the strip follows, else the clock. */
export function timeMarks(
  from_s: number,
  to_s: number,
  most: number,
  following: boolean,
): { at_s: number; ago_s: number }[] {
  const step = timeStep((to_s - from_s) / most);
  const origin = following ? to_s : 0;
  return ticks(from_s - origin, to_s - origin, step).map((v) => ({ at_s: v + origin, ago_s: -v }));
}

/** Steps people count time in. */
function timeStep(least_s: number): number {
  const steps = [0.1, 0.2, 0.5, 1, 2, 5, 10, 15, 30, 60, 120, 300];
  return steps.find((step) => step >= least_s * (1 - 1e-9)) ?? 600;
}

export function agoWords(ago_s: number, span_s: number, endWord: string): string {
  if (Math.abs(ago_s) < 1e-6) return endWord;
  if (span_s > 100) {
    const minutes = ago_s / 60;
    return `−${Number.isInteger(minutes) ? minutes : minutes.toFixed(1)} min`;
  }
  return `−${Number(ago_s.toFixed(1))} s`;
}
