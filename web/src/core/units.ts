/** Units an angle can be shown in; the service always speaks arc-seconds. */
export type AngleUnit = 'arcsec' | 'urad' | 'mm/m';
export type Unit = AngleUnit | 'px';

/** A degree is pi/180 rad, a second of arc 1/3600 of it (SI Brochure, 9th edition, table 8). */
export const ARCSEC_PER_RAD = (180 * 3600) / Math.PI;

/** mm/m is the slope, the tangent of the angle. */
export function fromArcsec(angle_arcsec: number, unit: AngleUnit): number {
  switch (unit) {
    case 'arcsec':
      return angle_arcsec;
    case 'urad':
      return (angle_arcsec / ARCSEC_PER_RAD) * 1e6;
    case 'mm/m':
      return Math.tan(angle_arcsec / ARCSEC_PER_RAD) * 1e3;
  }
}

/** A small difference at an angle, by the derivative of the conversion there. */
export function spreadFromArcsec(sd_arcsec: number, at_arcsec: number, unit: AngleUnit): number {
  if (unit !== 'mm/m') return fromArcsec(sd_arcsec, unit);
  const slope = Math.tan(at_arcsec / ARCSEC_PER_RAD);
  return (sd_arcsec / ARCSEC_PER_RAD) * 1e3 * (1 + slope * slope);
}

/** What is written behind a number, without a space for the double prime. */
export const SYMBOL: Record<Unit, string> = {
  arcsec: '″',
  urad: ' µrad',
  'mm/m': ' mm/m',
  px: ' px',
};

export const UNIT_NAME: Record<Unit, string> = {
  arcsec: 'arcsec',
  urad: 'µrad',
  'mm/m': 'mm/m',
  px: 'px',
};

export const SPOKEN: Record<Unit, string> = {
  arcsec: 'seconds of arc',
  urad: 'microradians',
  'mm/m': 'millimetres per metre',
  px: 'pixels',
};
