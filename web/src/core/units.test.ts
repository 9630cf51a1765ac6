import { expect, it } from 'vitest';
import { ARCSEC_PER_RAD, fromArcsec, spreadFromArcsec } from './units';

// SI Brochure, 9th edition, table 8: 1" = (pi/648 000) rad.
it('knows the second of arc', () => {
  expect(1 / ARCSEC_PER_RAD).toBeCloseTo(Math.PI / 648_000, 20);
  expect(fromArcsec(1, 'urad')).toBeCloseTo(4.84813681109536, 12);
});

// One millimetre per metre is 206.26 arc-seconds for small angles (common practice with levels);
// exactly, atan(0.001) = 206.264737... arc-seconds.
it('gives the slope by the tangent', () => {
  expect(fromArcsec(Math.atan(0.001) * ARCSEC_PER_RAD, 'mm/m')).toBeCloseTo(1, 12);
  expect(fromArcsec(45 * 3600, 'mm/m')).toBeCloseTo(1000, 9);
  expect(fromArcsec(-3600, 'mm/m')).toBeCloseTo(-17.4550649282176, 10);
});

it('turns an uncertainty by the derivative', () => {
  for (const at of [0, 1000, 45 * 3600]) {
    const step = 1e-3;
    const slope = (fromArcsec(at + step, 'mm/m') - fromArcsec(at - step, 'mm/m')) / (2 * step);
    expect(spreadFromArcsec(1, at, 'mm/m') / slope).toBeCloseTo(1, 6);
  }
  expect(spreadFromArcsec(0.5, 1e5, 'urad')).toBe(fromArcsec(0.5, 'urad'));
});
