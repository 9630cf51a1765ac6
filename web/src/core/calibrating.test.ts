import { describe, expect, it } from 'vitest';
import { percent, progressOf, worksAt, type Expected } from './calibrating';

const NOT_BEGUN = {
  plan: null,
  points: [],
  lacking: '',
  method: null,
  focal_length_px: null,
  focal_length_rel_u: null,
  residual_rms_arcsec: null,
  warnings: [],
};

describe('a calibration under way', () => {
  it('is read before it has begun', () => {
    expect(progressOf(NOT_BEGUN)).toEqual(NOT_BEGUN);
  });

  it('is refused with a way nobody knows', () => {
    expect(() => progressOf({ ...NOT_BEGUN, plan: { way: 'steps' } })).toThrow(/way/);
  });

  it('has uncertainties in per cent, with two digits', () => {
    expect(percent(0.0021)).toBe('0.21 %');
    expect(percent(0.0123)).toBe('1.2 %');
    expect(percent(0.2)).toBe('20 %');
    expect(percent(null)).toBe('–');
  });

  it('names what counts most, and nothing while both do', () => {
    const expected = (points_rel_u: number, rel_u: number): Expected => ({
      rel_u: 0.01,
      points_rel_u,
      shared: [{ name: 'length of the lever', rel_u }],
      range_arcsec: 100,
    });
    expect(worksAt(expected(0.01, 0.001), 'lever')).toMatch(/heights/);
    expect(worksAt(expected(0.001, 0.01), 'lever')).toMatch(/length of the lever/);
    expect(worksAt(expected(0.01, 0.01), 'angles')).toBe('');
  });
});
