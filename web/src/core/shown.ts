import type { Average, Newest, Zero } from './protocol';
import type { Spread } from './statistics';
import { spreadFromArcsec, fromArcsec, type AngleUnit, type Unit } from './units';

export interface AxisShown {
  value: number | null;
  /** Standard error of the value from noise alone; of a position the scatter of one. */
  noise: number | null;
  /** Combined standard uncertainty. */
  u: number | null;
}

export interface Shown {
  unit: Unit;
  x: AxisShown;
  y: AxisShown;
  /** The same tilt in arc-seconds, for the drawing of the mirror; null without a calibration. */
  x_arcsec: number | null;
  y_arcsec: number | null;
  /** Standard uncertainty of one reading from noise alone, the larger axis; 0 when unknown. */
  grain: number;
  basis: 'average' | 'single' | 'none';
  /** e.g. "mean of 1.0 s". */
  basisWords: string;
  /** Quality words of the newest reading. */
  quality: readonly string[];
  relative: boolean;
}

export const NOTHING: AxisShown = { value: null, noise: null, u: null };

/**
 * The number to show: the average where there is one; else the newest reading alone, said so,
 * because a doubtful angle with its doubt helps more than none; else nothing, with the reason.
 */
export function shownAngle(
  average: Average | null,
  newest: Newest,
  zero: Zero | null,
  unit: AngleUnit,
): Shown {
  const averaged = average !== null && average.x_arcsec !== null && average.y_arcsec !== null;
  const single = !averaged && newest.x_arcsec !== null && newest.y_arcsec !== null;
  const tilt = (name: 'x' | 'y'): number | null => {
    const absolute = averaged ? average[`${name}_arcsec`] : newest[`${name}_arcsec`];
    return absolute === null ? null : absolute - (zero?.[`${name}_arcsec`] ?? 0);
  };
  const axis = (name: 'x' | 'y'): AxisShown => {
    const value = tilt(name);
    if (value === null) return NOTHING;
    const sd = newest[`${name}_sd_arcsec`];
    const noise = averaged ? average[`${name}_se_arcsec`] : sd;
    const u = combined(newest[`${name}_${zero ? 'rel_u' : 'u'}_arcsec`], sd, noise);
    return {
      value: fromArcsec(value, unit),
      noise: noise === null ? null : spreadFromArcsec(noise, value, unit),
      u: u === null ? null : spreadFromArcsec(u, value, unit),
    };
  };
  return {
    unit,
    x: axis('x'),
    y: axis('y'),
    x_arcsec: tilt('x'),
    y_arcsec: tilt('y'),
    grain: fromArcsec(Math.max(newest.x_sd_arcsec ?? 0, newest.y_sd_arcsec ?? 0), unit),
    basis: averaged ? 'average' : single ? 'single' : 'none',
    basisWords: averaged ? averageWords(average) : single ? 'one reading alone' : '',
    quality: newest.quality,
    relative: zero !== null,
  };
}

/** Without a calibration: where the return lies in the picture, averaged by the page. */
export function shownPosition(
  x: Spread | null,
  y: Spread | null,
  newest: Newest,
  window_s: number,
): Shown {
  const there = newest.x_px !== null && newest.y_px !== null;
  const axis = (spread: Spread | null): AxisShown => {
    if (!there || spread === null) return NOTHING;
    // Of one reading: neighbouring ones are not independent, so that sd / sqrt(n) claims too much.
    return { value: spread.mean, noise: spread.sd, u: spread.sd };
  };
  return {
    unit: 'px',
    x: axis(x),
    y: axis(y),
    x_arcsec: null,
    y_arcsec: null,
    grain: Math.max(x?.sd ?? 0, y?.sd ?? 0),
    basis: there ? 'average' : 'none',
    basisWords: averageWords({ statistic: 'mean', window_s }),
    quality: newest.quality,
    relative: false,
  };
}

export function averageWords(average: { statistic: string; window_s: number }): string {
  return `${average.statistic} of ${average.window_s.toFixed(1)} s`;
}

/**
 * The row's combined uncertainty, of the tilt or of its difference from the zero, with its own
 * noise replaced by that of the average (JCGM 100:2008, 5.1.2).
 */
function combined(u: number | null, sd: number | null, noise: number | null): number | null {
  if (u === null) return null;
  const common2 = Math.max(0, u * u - (sd ?? 0) ** 2);
  return Math.sqrt(common2 + (noise ?? sd ?? 0) ** 2);
}
