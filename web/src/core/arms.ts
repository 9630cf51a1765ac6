/**
 * The fitted arms as SVG paths across the picture. Angles are positive clockwise on screen: the
 * upright arm runs along (-sin a, cos a), the level one along (cos a, sin a).
 */
export function armEnds(
  cross: { x: number; y: number },
  upright_deg: number | null,
  level_deg: number | null,
  reach_px: number,
): { upright: string | null; level: string | null } {
  const line = (dx: number, dy: number): string =>
    `M${cross.x - dx * reach_px} ${cross.y - dy * reach_px}L${cross.x + dx * reach_px} ${cross.y + dy * reach_px}`;
  const rad = (deg: number): number => (deg * Math.PI) / 180;
  return {
    upright:
      upright_deg === null ? null : line(-Math.sin(rad(upright_deg)), Math.cos(rad(upright_deg))),
    level: level_deg === null ? null : line(Math.cos(rad(level_deg)), Math.sin(rad(level_deg))),
  };
}
