import { Fields } from './fields';
import { signed } from './numbers';
import { ARCSEC_PER_RAD } from './units';

export const OUTCOMES = ['unproven', 'proven', 'mirrored', 'swapped'] as const;
export type Outcome = (typeof OUTCOMES)[number];
export type Edge = 'top' | 'right';

/** By how much a push changed the reading. */
export interface Push {
  x_arcsec: number;
  y_arcsec: number;
}

export interface FoilSeen {
  expected_arcsec: number;
  /** agrees, half, double or differs; nothing where that is not known. */
  scale: string | null;
  text: string;
}

/** What the nudge test and the foil test have shown so far. */
export interface Signs {
  calibration_id: string | null;
  signs: string | null;
  resting: boolean;
  peak: Push | null;
  top: Push | null;
  right: Push | null;
  foil: FoilSeen | null;
  outcome: Outcome;
  text: string;
}

export function signsOf(value: unknown): Signs {
  const fields = Fields.of(value, 'the signs');
  const foil = fields.objectOrNull('foil');
  return {
    calibration_id: fields.textOrNull('calibration_id'),
    signs: fields.textOrNull('signs'),
    resting: fields.flag('resting'),
    peak: pushOf(fields.objectOrNull('peak')),
    top: pushOf(fields.objectOrNull('top')),
    right: pushOf(fields.objectOrNull('right')),
    foil: foil && {
      expected_arcsec: foil.number('expected_arcsec'),
      scale: foil.textOrNull('scale'),
      text: foil.text('text'),
    },
    outcome: fields.oneOf('outcome', OUTCOMES),
    text: fields.text('text'),
  };
}

function pushOf(fields: Fields | null): Push | null {
  return fields && { x_arcsec: fields.number('x_arcsec'), y_arcsec: fields.number('y_arcsec') };
}

/** "X +0.4″, Y +15.2″". */
export function pushWords(push: Push): string {
  return `X ${signed(push.x_arcsec, 1)}″, Y ${signed(push.y_arcsec, 1)}″`;
}

/** Tilt of a base raised at one end by a foil; nothing for what cannot be. */
export function foilTilt(thickness_mm: number | null, base_mm: number | null): number | null {
  if (!thickness_mm || !base_mm || thickness_mm <= 0 || thickness_mm >= base_mm) return null;
  return Math.asin(thickness_mm / base_mm) * ARCSEC_PER_RAD;
}
