/** Messages for tests, as the service sends them. */
import type { Readings, Status } from './protocol';

export function readings(seq: number[], step_s = 0.1): Readings {
  return {
    kind: 'readings',
    seq,
    t_s: seq.map((n) => n * step_s),
    x_arcsec: seq.map((n) => n),
    y_arcsec: seq.map((n) => -n),
    x_sd_arcsec: seq.map(() => 0.02),
    y_sd_arcsec: seq.map(() => 0.02),
    x_u_arcsec: seq.map(() => 0.1),
    y_u_arcsec: seq.map(() => 0.1),
    x_rel_u_arcsec: seq.map(() => null),
    y_rel_u_arcsec: seq.map(() => null),
    x_px: seq.map(() => 300),
    y_px: seq.map(() => 200),
    quality: seq.map(() => []),
    dropped: 0,
    average: null,
  };
}

export function status(): Status {
  return {
    kind: 'status',
    source: 'simulated',
    source_name: 'simulated mirror',
    simulated: true,
    state: 'measuring',
    state_detail: '',
    frames_per_s: 30,
    frames: 10,
    frames_unusable: 0,
    missed: 0,
    image_width_px: 640,
    image_height_px: 480,
    calibration: {
      id: 'nominal-1',
      name: '',
      method: 'nominal',
      signs: 'unproven',
      focal_length_mm: 300,
      scale_x_arcsec_per_px: 1.186,
      scale_y_arcsec_per_px: 1.186,
      created_utc: null,
      warnings: [],
      field_arcsec: [
        [-380, 285],
        [380, 285],
        [380, -285],
        [-380, -285],
      ],
    },
    zero: null,
    zero_wanted: '',
    prepared_utc: null,
    run: null,
    session_start_utc: '2026-12-01T09:00:00.000Z',
    version: '0.1.0',
  };
}
