import { describe, expect, it } from 'vitest';
import { foilTilt, pushWords, signsOf } from './signs';

describe('the signs', () => {
  it('are said as a person reads them', () => {
    expect(pushWords({ x_arcsec: -0.04, y_arcsec: 15.25 })).toBe('X +0.0″, Y +15.3″');
  });

  it('a foil of 0.05 mm under 100 mm is 103.1 seconds of arc', () => {
    expect(foilTilt(0.05, 100)).toBeCloseTo(103.13, 2);
    expect(foilTilt(null, 100)).toBeNull();
    expect(foilTilt(5, 2)).toBeNull();
  });

  it('are refused with an outcome nobody knows', () => {
    const signs = {
      calibration_id: null,
      signs: null,
      resting: false,
      peak: null,
      top: { x_arcsec: 1, y_arcsec: 2 },
      right: null,
      foil: null,
      outcome: 'unproven',
      text: '',
    };
    expect(signsOf(signs)).toEqual(signs);
    expect(() => signsOf({ ...signs, outcome: 'perhaps' })).toThrow(/outcome/);
  });
});
