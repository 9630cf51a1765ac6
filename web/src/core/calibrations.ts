import { dateWords } from './clock';
import { Fields } from './fields';

/** A calibration file kept by the service, to choose. */
export interface KeptCalibration {
  id: string;
  /** What it was called when it was made; nothing for a file that was not named. */
  name: string;
  created_utc: string;
  method: string;
  signs: string;
  target: string;
  focal_length_mm: number | null;
  focal_length_px: number | null;
  n: number;
  image_width_px: number;
  image_height_px: number;
  focal_length_rel_u: number | null;
  source: string;
  conditions: string;
  note: string;
  warnings: string[];
  /** The readings are made with it now. */
  active: boolean;
  path: string;
}

export function keptOf(value: unknown): KeptCalibration[] {
  return Fields.listOf(value, 'the list of calibrations').map(keptOne);
}

export function keptOne(fields: Fields): KeptCalibration {
  return {
    id: fields.text('id'),
    name: fields.text('name'),
    created_utc: fields.text('created_utc'),
    method: fields.text('method'),
    signs: fields.text('signs'),
    target: fields.text('target'),
    focal_length_mm: fields.numberOrNull('focal_length_mm'),
    focal_length_px: fields.numberOrNull('focal_length_px'),
    n: fields.number('n'),
    image_width_px: fields.number('image_width_px'),
    image_height_px: fields.number('image_height_px'),
    focal_length_rel_u: fields.numberOrNull('focal_length_rel_u'),
    source: fields.text('source'),
    conditions: fields.text('conditions'),
    note: fields.text('note'),
    warnings: fields.words('warnings'),
    active: fields.flag('active'),
    path: fields.text('path'),
  };
}

/** What a person calls it. */
export function nameOfKept(kept: KeptCalibration): string {
  return kept.name === '' ? kept.id : kept.name;
}

/** "12 Nov 2026, known tilts, both axes, 15 frames, 290.36 mm". */
export function madeWords(kept: KeptCalibration): string {
  const parts = [dateWords(kept.created_utc), kept.method];
  if (kept.n > 0) parts.push(`${kept.n} frames`);
  if (kept.focal_length_mm !== null) parts.push(`${kept.focal_length_mm.toFixed(2)} mm`);
  else if (kept.focal_length_px !== null) parts.push(`${kept.focal_length_px.toFixed(0)} px`);
  if (kept.signs !== 'proven') parts.push('signs unproven');
  return parts.join(', ');
}

/** Why it cannot be used with these pictures and what to do; nothing when it can, as far as known. */
export function misfit(
  kept: KeptCalibration,
  width_px: number | null,
  height_px: number | null,
): string {
  if (width_px === null || height_px === null) return '';
  if (kept.image_width_px === width_px && kept.image_height_px === height_px) return '';
  return (
    `It is for pictures of ${kept.image_width_px} × ${kept.image_height_px} px, these are ` +
    `${width_px} × ${height_px} px: calibrate this size, or set the camera to that one.`
  );
}
