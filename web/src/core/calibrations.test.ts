import { describe, expect, it } from 'vitest';
import { keptOf, madeWords, misfit, nameOfKept } from './calibrations';

const KEPT = {
  id: 'tilts-1',
  name: '',
  created_utc: '2026-11-12T12:00:00Z',
  method: 'known tilts, both axes',
  signs: 'unproven',
  target: 'crosshair',
  focal_length_mm: 290.3629,
  focal_length_px: 84163.1,
  n: 15,
  image_width_px: 640,
  image_height_px: 480,
  focal_length_rel_u: 0.002,
  source: '',
  conditions: '',
  note: '',
  warnings: [],
  active: true,
  path: '/data/calibrations/tilts-1.json',
};

describe('calibrations to choose from', () => {
  it('are read and named', () => {
    const [kept] = keptOf([KEPT]);
    expect(kept && madeWords(kept)).toBe(
      '12 Nov 2026, known tilts, both axes, 15 frames, 290.36 mm, signs unproven',
    );
    expect(madeWords(keptOf([{ ...KEPT, signs: 'proven', focal_length_mm: null, n: 0 }])[0] ?? KEPT)).toBe(
      '12 Nov 2026, known tilts, both axes, 84163 px',
    );
  });

  it('say when they are for other pictures, and stay silent while that is not known', () => {
    expect(misfit(KEPT, 640, 480)).toBe('');
    expect(misfit(KEPT, null, null)).toBe('');
    expect(misfit(KEPT, 1280, 480)).toMatch(/640 × 480 px, these are 1280 × 480 px: calibrate/);
  });

  it('have the name they were given, else their id', () => {
    expect(nameOfKept(KEPT)).toBe('tilts-1');
    expect(nameOfKept({ ...KEPT, name: 'north wall' })).toBe('north wall');
  });
});
