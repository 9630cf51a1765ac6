"""What a calibration by known tilts will be worth, said before the first point is taken.

For tilts t_i, each known to ``sd`` independently and all to a common relative ``common_rel_sd``
(scale of a stage, length of a lever), the slope of a straight line through them has

    u(f)/f = sqrt(sd^2 / sum (t_i - mean t)^2 + common_rel_sd^2)

(least squares with equal weights, e.g. JCGM 100:2008, H.3; the common part is not averaged down,
JCGM 100:2008, 5.2). Heights under a lever stand for tilts: at small angles the ratio is the same.
The noise of the pictures comes on top; an average of a second is usually far below.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from readout.errors import BadInput


@dataclass(frozen=True, slots=True)
class Expected:
    """Relative standard uncertainty of the focal length: of the points, common, and both."""

    points_rel_u: float
    common_rel_u: float

    @property
    def rel_u(self) -> float:
        return math.hypot(self.points_rel_u, self.common_rel_u)


def expected_scale(lowest: float, highest: float, n: int, *, sd: float, common: float) -> Expected:
    """For ``n`` points evenly from ``lowest`` to ``highest``, in the unit of ``sd``.

    Raises BadInput for fewer than three points or for two ends that are one.
    """
    if n < 3:
        raise BadInput(f"{n} points leave nothing to check the scale with: plan three at least")
    if not highest > lowest:
        raise BadInput("the points must reach from a smaller to a larger value: give both ends")
    values = np.linspace(lowest, highest, n)
    return Expected(sd / math.sqrt(float(np.sum((values - values.mean()) ** 2))), common)
