import { Fields } from './fields';
import type { AngleUnit } from './units';

export const UNITS = ['arcsec', 'urad', 'mm/m'] as const satisfies readonly AngleUnit[];
export const THEMES = ['auto', 'day', 'night'] as const;
export const MOUNTINGS = ['straight', 'swapped_sides', 'upside_down', 'half_turn'] as const;

export type Theme = (typeof THEMES)[number];
export type Mounting = (typeof MOUNTINGS)[number];

export interface Optics {
  focal_length_mm: number | null;
  pitch_um: number | null;
  mounting: Mounting;
}

/** The part of the service's settings this page reads and writes. */
export interface Settings {
  unit: AngleUnit;
  theme: Theme;
  average_s: number;
  /** Path of the calibration file chosen, on the service's machine. */
  calibration: string | null;
  optics: Optics;
}

export const FIRST_SETTINGS: Settings = {
  unit: 'arcsec',
  theme: 'auto',
  average_s: 1,
  calibration: null,
  optics: { focal_length_mm: null, pitch_um: null, mounting: 'straight' },
};

const WINDOWS_S = [0.2, 0.5, 1, 2, 5, 10, 30];

/** Averaging times to choose from; one set elsewhere is among them. */
export function windowsWith(average_s: number): number[] {
  return [...new Set([...WINDOWS_S, average_s])].sort((a, b) => a - b);
}

export function settingsOf(value: unknown): Settings {
  const fields = Fields.of(value, 'settings');
  const optics = fields.object('optics');
  return {
    unit: fields.oneOf('unit', UNITS),
    theme: fields.oneOf('theme', THEMES),
    average_s: fields.number('average_s'),
    calibration: fields.textOrNull('calibration'),
    optics: {
      focal_length_mm: optics.numberOrNull('focal_length_mm'),
      pitch_um: optics.numberOrNull('pitch_um'),
      mounting: optics.oneOf('mounting', MOUNTINGS),
    },
  };
}
