"""Two fitted arms become a point: where they cross, with its covariance."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from readout.model import F64
from readout.sighting.arm import ArmFit
from readout.sighting.fold import Line

Cov = tuple[float, float, float]


@dataclass(frozen=True, slots=True)
class Cross:
    """An upright and a level arm of one polarity, fitted."""

    upright: ArmFit
    level: ArmFit

    def point(self) -> tuple[float, float, Cov]:
        """x, y in pixels and their covariance (xx, xy, yy).

        Light that rises across an arm pulls it towards the brighter side; how it rises, the other
        arm shows, which lies that way.
        """
        upright, level = self.upright, self.level
        x, y = crossing(upright.line, level.line)
        rise, rise_var = self._rise(x, y)
        x_lean = upright.lean / upright.line.cosine
        y_lean = level.lean / level.line.cosine
        to_point = np.linalg.inv(np.array([[1.0, -upright.line.slope], [-level.line.slope, 1.0]]))
        x, y = (
            np.array([x, y]) - to_point @ np.array([x_lean * rise[0], y_lean * rise[1]])
        ).tolist()
        x_var = upright.x_var_at(y) + x_lean**2 * rise_var[0]
        y_var = level.x_var_at(x) + y_lean**2 * rise_var[1]
        cov = to_point @ np.diag([x_var, y_var]) @ to_point.T
        return x, y, (float(cov[0, 0]), float(cov[0, 1]), float(cov[1, 1]))

    def _rise(self, x: float, y: float) -> tuple[F64, F64]:
        """Relative rise of the light per pixel along x and along y at a place, and its variances.

        Each arm shows it along itself: as a row goes by, a turned one goes sideways too.
        """
        along = [
            (0.0, 0.0) if arm.light is None else arm.light.rise_at(place)
            for arm, place in ((self.level, x), (self.upright, y))
        ]
        slopes = np.array([[1.0, self.level.line.slope], [self.upright.line.slope, 1.0]])
        to_axes = np.linalg.inv(slopes)
        return to_axes @ [rise for rise, _ in along], to_axes**2 @ [sd**2 for _, sd in along]


def crossing(upright: Line, level: Line) -> tuple[float, float]:
    """Intersection (x, y) in pixels of an upright line x(y) and a level line y(x)."""
    y_at_middle = level.middle_x + level.slope * (upright.middle_x - level.middle_y)
    y = (y_at_middle - level.slope * upright.slope * upright.middle_y) / (
        1 - upright.slope * level.slope
    )
    return float(upright.x_at(y)), float(y)
