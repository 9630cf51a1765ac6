"""Two fitted arms become a point: where they cross, with its covariance."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

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
        x_pull, x_pull_var = _pull(upright, level, x)
        y_pull, y_pull_var = _pull(level, upright, y)
        to_point = np.linalg.inv(np.array([[1.0, -upright.line.slope], [-level.line.slope, 1.0]]))
        x, y = (np.array([x, y]) - to_point @ np.array([x_pull, y_pull])).tolist()
        var = [upright.x_var_at(y) + x_pull_var, level.x_var_at(x) + y_pull_var]
        cov = to_point @ np.diag(var) @ to_point.T
        return x, y, (float(cov[0, 0]), float(cov[0, 1]), float(cov[1, 1]))


def crossing(upright: Line, level: Line) -> tuple[float, float]:
    """Intersection (x, y) in pixels of an upright line x(y) and a level line y(x)."""
    y_at_middle = level.middle_x + level.slope * (upright.middle_x - level.middle_y)
    y = (y_at_middle - level.slope * upright.slope * upright.middle_y) / (
        1 - upright.slope * level.slope
    )
    return float(upright.x_at(y)), float(y)


def _pull(arm: ArmFit, other: ArmFit, along_other: float) -> tuple[float, float]:
    """By how much uneven light pulls an arm, px, and the variance of that, px^2."""
    if other.light is None:
        return 0.0, 0.0
    rise, rise_sd = other.light.rise_at(along_other)
    lean = arm.lean * arm.line.cosine
    return lean * rise, (lean * rise_sd) ** 2
