import { describe, expect, it } from 'vitest';
import { ProtocolError } from './fields';
import { settingsOf, windowsWith } from './settings';

const whole = {
  schema: 'readout.settings/1',
  unit: 'mm/m',
  theme: 'night',
  average_s: 3,
  calibration: '/data/bench.json',
  optics: { focal_length_mm: null, pitch_um: 3.45, mounting: 'half_turn' },
  something_new: 1,
};

describe('settings', () => {
  it('are read, and what this page does not know is left alone', () => {
    expect(settingsOf(whole)).toEqual({
      unit: 'mm/m',
      theme: 'night',
      average_s: 3,
      calibration: '/data/bench.json',
      optics: { focal_length_mm: null, pitch_um: 3.45, mounting: 'half_turn' },
    });
  });

  it('of an unknown kind are refused with the name of what is wrong', () => {
    expect(() => settingsOf({ ...whole, unit: 'degree' })).toThrow(ProtocolError);
    expect(() => settingsOf({ ...whole, unit: 'degree' })).toThrow(
      /unit is not one of arcsec, urad, mm\/m/,
    );
    expect(() => settingsOf({ ...whole, optics: null })).toThrow(/optics is not an object/);
  });

  it('offer the averaging time in use among the others, once', () => {
    expect(windowsWith(3)).toEqual([0.2, 0.5, 1, 2, 3, 5, 10, 30]);
    expect(windowsWith(1)).toEqual([0.2, 0.5, 1, 2, 5, 10, 30]);
  });
});
