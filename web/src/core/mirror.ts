import { ARCSEC_PER_RAD } from './units';

export type Point = readonly [x: number, y: number];

/** The drawing turns by this angle when the value fills the range: a factor of 1-2-5 numbers. */
const FULL_ARCSEC = 1e5;

/** How far the eye of the drawing stands off, in half sides of the mirror. */
const EYE = 3.2;
const THICKNESS = 0.16;

export function exaggeration(range_arcsec: number): number {
  return Math.round(FULL_ARCSEC / range_arcsec);
}

/**
 * Seen from the instrument, in perspective, x right and y down as on a screen; the half side of
 * the untilted mirror is 1. Axes of the mirror by the normal n = (sin X cos Y, sin Y, cos X cos Y),
 * z away from the observer.
 */
export function projection(
  x_arcsec: number,
  y_arcsec: number,
): (right: number, up: number, back?: number) => Point {
  const x = x_arcsec / ARCSEC_PER_RAD;
  const y = y_arcsec / ARCSEC_PER_RAD;
  const [sx, cx, sy, cy] = [Math.sin(x), Math.cos(x), Math.sin(y), Math.cos(y)];
  return (right, up, back = 0) => {
    const px = right * cx - up * sx * sy + back * sx * cy;
    const py = up * cy + back * sy;
    const pz = -right * sx - up * cx * sy + back * cx * cy;
    const scale = EYE / (EYE + pz);
    return [px * scale, -py * scale];
  };
}

export interface MirrorDrawing {
  front: Point[];
  back: Point[];
  /** From the top edge to the bottom edge, and from the left one to the right one. */
  upright: [Point, Point];
  level: [Point, Point];
}

export function drawMirror(x_arcsec: number, y_arcsec: number): MirrorDrawing {
  const at = projection(x_arcsec, y_arcsec);
  const corners: [number, number][] = [
    [-1, 1],
    [1, 1],
    [1, -1],
    [-1, -1],
  ];
  return {
    front: corners.map(([right, up]) => at(right, up)),
    back: corners.map(([right, up]) => at(right, up, THICKNESS)),
    upright: [at(0, 1), at(0, -1)],
    level: [at(-1, 0), at(1, 0)],
  };
}

export function path(points: readonly Point[]): string {
  return `M${points.map(([x, y]) => `${x.toFixed(4)} ${y.toFixed(4)}`).join('L')}Z`;
}
