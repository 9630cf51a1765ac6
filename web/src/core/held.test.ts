import { describe, expect, it } from 'vitest';
import { changedSince, isOfSession, sceneOf } from './held';
import type { Newest, Zero } from './protocol';
import { status } from './samples';
import { shownAngle } from './shown';

const newest: Newest = {
  x_arcsec: 10,
  y_arcsec: -3,
  x_sd_arcsec: 0.3,
  y_sd_arcsec: 0.3,
  x_u_arcsec: 0.5,
  y_u_arcsec: 0.5,
  x_rel_u_arcsec: null,
  y_rel_u_arcsec: null,
  x_px: 320,
  y_px: 240,
  quality: [],
};
const zero: Zero = {
  x_arcsec: 4,
  y_arcsec: -1,
  x_sd_arcsec: 0.03,
  y_sd_arcsec: 0.03,
  n: 30,
  set_utc: '2026-12-01T09:10:00.000Z',
};

function scene(now = status()) {
  return sceneOf(shownAngle(null, newest, now.zero, 'arcsec'), 12, now);
}

describe('what has changed since a scene was made', () => {
  it('is nothing while all stands, whatever the source does', () => {
    const now = { ...status(), zero };
    expect(changedSince(scene(now), now)).toEqual([]);
    expect(changedSince(scene(now), { ...now, state: 'lost' })).toEqual([]);
  });

  it('is a zero that was taken back or set anew', () => {
    const held = scene({ ...status(), zero });
    const gone = ['against a zero that no longer exists'];
    expect(changedSince(held, status())).toEqual(gone);
    const anew = { ...zero, set_utc: '2026-12-01T09:11:00.000Z' };
    expect(changedSince(held, { ...status(), zero: anew })).toEqual(gone);
    expect(held.shown.x.value).toBe(6);
  });

  it('is a zero that was set later', () => {
    expect(changedSince(scene(), { ...status(), zero })).toEqual(['before the zero was set']);
  });

  it('is another start of the service, another source, another calibration', () => {
    const held = scene({ ...status(), zero });
    const after = {
      ...status(),
      session_start_utc: '2026-12-01T10:00:00.000Z',
      source: '/frames',
      calibration: null,
    };
    expect(isOfSession(held, after)).toBe(false);
    expect(changedSince(held, after)).toEqual([
      'before the service was started again',
      'from another source',
      'with another calibration',
      'against a zero that no longer exists',
    ]);
  });
});
