import { keptOne, type KeptCalibration } from './calibrations';
import { Fields } from './fields';
import { plain } from './numbers';

export const WAYS = ['angles', 'lever'] as const;
export type Way = (typeof WAYS)[number];

/** How the tilts are known; what does not belong to the way is null. */
export interface Plan {
  way: Way;
  sd_arcsec: number | null;
  scale_rel_sd: number | null;
  lever_mm: number | null;
  lever_sd_mm: number | null;
  height_sd_mm: number | null;
  horizontal: boolean;
}

/** A tilt as it is given: angles, or a height and the axis it tilts. */
export interface Known {
  x_arcsec?: number | null;
  y_arcsec?: number | null;
  height_mm?: number | null;
  axis?: 'x' | 'y';
}

export interface Point {
  number: number;
  x_arcsec: number | null;
  y_arcsec: number | null;
  height_mm: number | null;
  n: number;
  x_residual_arcsec: number | null;
  y_residual_arcsec: number | null;
  outlier: boolean;
}

/** Where the calibration stands; without a plan it has not begun. */
export interface Progress {
  plan: Plan | null;
  points: Point[];
  lacking: string;
  method: string | null;
  focal_length_px: number | null;
  focal_length_rel_u: number | null;
  residual_rms_arcsec: number | null;
  warnings: string[];
}

/** u(f)/f of a plan: of all, of what is new in each point, of what points share, by its name. */
export interface Expected {
  rel_u: number | null;
  points_rel_u: number | null;
  shared: { name: string; rel_u: number | null }[];
  range_arcsec: number | null;
}

export interface Finished {
  kept: KeptCalibration;
  warnings: string[];
  used: boolean;
  why_not: string;
}

export function progressOf(value: unknown): Progress {
  const fields = Fields.of(value, 'the calibration under way');
  const plan = fields.objectOrNull('plan');
  return {
    plan: plan && {
      way: plan.oneOf('way', WAYS),
      sd_arcsec: plan.numberOrNull('sd_arcsec'),
      scale_rel_sd: plan.numberOrNull('scale_rel_sd'),
      lever_mm: plan.numberOrNull('lever_mm'),
      lever_sd_mm: plan.numberOrNull('lever_sd_mm'),
      height_sd_mm: plan.numberOrNull('height_sd_mm'),
      horizontal: plan.flag('horizontal'),
    },
    points: fields.objects('points').map((point) => ({
      number: point.number('number'),
      x_arcsec: point.numberOrNull('x_arcsec'),
      y_arcsec: point.numberOrNull('y_arcsec'),
      height_mm: point.numberOrNull('height_mm'),
      n: point.number('n'),
      x_residual_arcsec: point.numberOrNull('x_residual_arcsec'),
      y_residual_arcsec: point.numberOrNull('y_residual_arcsec'),
      outlier: point.flag('outlier'),
    })),
    lacking: fields.text('lacking'),
    method: fields.textOrNull('method'),
    focal_length_px: fields.numberOrNull('focal_length_px'),
    focal_length_rel_u: fields.numberOrNull('focal_length_rel_u'),
    residual_rms_arcsec: fields.numberOrNull('residual_rms_arcsec'),
    warnings: fields.words('warnings'),
  };
}

export function expectedOf(value: unknown): Expected {
  const fields = Fields.of(value, 'what is to be expected');
  return {
    rel_u: fields.numberOrNull('rel_u'),
    points_rel_u: fields.numberOrNull('points_rel_u'),
    shared: fields.objects('shared').map((part) => ({
      name: part.text('name'),
      rel_u: part.numberOrNull('rel_u'),
    })),
    range_arcsec: fields.numberOrNull('range_arcsec'),
  };
}

export function finishedOf(value: unknown): Finished {
  const fields = Fields.of(value, 'the calibration kept');
  return {
    kept: keptOne(fields.object('kept')),
    warnings: fields.words('warnings'),
    used: fields.flag('used'),
    why_not: fields.text('why_not'),
  };
}

/** "0.21 %", two digits of it. */
export function percent(share: number | null): string {
  if (share === null || !Number.isFinite(share)) return '–';
  const value = 100 * share;
  const decimals = value <= 0 ? 0 : Math.min(5, Math.max(0, 1 - Math.floor(Math.log10(value))));
  return `${plain(value, decimals)} %`;
}

/** Which part of the uncertainty to work at; nothing where none is the largest by far. */
export function worksAt(expected: Expected, way: Way): string {
  const points = expected.points_rel_u ?? 0;
  const [most] = [...expected.shared].sort((a, b) => (b.rel_u ?? 0) - (a.rel_u ?? 0));
  const common = most?.rel_u ?? 0;
  if (points > 2 * common) {
    return way === 'lever'
      ? 'The single heights count most: lift higher, take more points, or use better blocks.'
      : 'The single settings count most: go further to both sides, or take more points.';
  }
  if (most !== undefined && common > 2 * points) {
    return `What counts most is common to all points: ${most.name}. More points do not help, knowing it better does.`;
  }
  return '';
}
