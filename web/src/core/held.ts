import type { CalibrationInUse, Status, Zero } from './protocol';
import type { Shown } from './shown';

/** What stands on the page: the numbers, and all they were made of. */
export interface Scene {
  shown: Shown;
  /** Time of the newest row in it. */
  t_s: number;
  zero: Zero | null;
  calibration: CalibrationInUse | null;
  source: string;
  session: string;
}

/** A scene that stays as it is, whatever becomes of the instrument. */
export interface Held extends Scene {
  at: Date;
}

export function sceneOf(shown: Shown, t_s: number, status: Status): Scene {
  return {
    shown,
    t_s,
    zero: shown.unit === 'px' ? null : status.zero,
    calibration: status.calibration,
    source: status.source,
    session: status.session_start_utc,
  };
}

/** The service that gave the scene is the one that answers now: its times mean the same. */
export function isOfSession(scene: Scene, status: Status | null): boolean {
  return scene.session === status?.session_start_utc;
}

/** What has changed under a scene since it was made, in words that follow "Held". */
export function changedSince(scene: Scene, status: Status): string[] {
  const changes: string[] = [];
  if (!isOfSession(scene, status)) changes.push('before the service was started again');
  if (scene.source !== status.source) changes.push('from another source');
  if (scene.calibration?.id !== status.calibration?.id) {
    changes.push(scene.calibration ? 'with another calibration' : 'without a calibration');
  }
  if (scene.zero && scene.zero.set_utc !== status.zero?.set_utc) {
    changes.push('against a zero that no longer exists');
  } else if (!scene.zero && status.zero && scene.shown.unit !== 'px') {
    changes.push('before the zero was set');
  }
  return changes;
}
