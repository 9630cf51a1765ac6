import { dateWords } from './clock';
import { Fields } from './fields';

/** A calibration file kept by the service, to choose. */
export interface KeptCalibration {
  id: string;
  created_utc: string;
  method: string;
  target: string;
  focal_length_mm: number | null;
  focal_length_px: number | null;
  n: number;
  image_width_px: number;
  image_height_px: number;
  path: string;
}

export function keptOf(value: unknown): KeptCalibration[] {
  return Fields.listOf(value, 'the list of calibrations').map((fields) => ({
    id: fields.text('id'),
    created_utc: fields.text('created_utc'),
    method: fields.text('method'),
    target: fields.text('target'),
    focal_length_mm: fields.numberOrNull('focal_length_mm'),
    focal_length_px: fields.numberOrNull('focal_length_px'),
    n: fields.number('n'),
    image_width_px: fields.number('image_width_px'),
    image_height_px: fields.number('image_height_px'),
    path: fields.text('path'),
  }));
}

/** "12 Nov 2026, known tilts, both axes, 15 frames, 290.36 mm". */
export function madeWords(kept: KeptCalibration): string {
  const parts = [dateWords(kept.created_utc), kept.method];
  if (kept.n > 0) parts.push(`${kept.n} frames`);
  if (kept.focal_length_mm !== null) parts.push(`${kept.focal_length_mm.toFixed(2)} mm`);
  else if (kept.focal_length_px !== null) parts.push(`${kept.focal_length_px.toFixed(0)} px`);
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
