"""A fainter line parallel to the arm, within the strip cut along it.

A second return from the back of a window or off a splitter, or the side lobe of a comatic line,
pulls the arm towards itself although each pixel has little of it. The folded residuals of the
whole arm show it: a matched filter with the arm's own profile, freed of what the fit absorbs.
"""

from __future__ import annotations

import math

import numpy as np

from readout.sighting.fold import Fold
from readout.sighting.profile import line_profile
from readout.sighting.shape import Beside
from readout.sighting.solve import Solution

SURE = 6.0
"""a reduced chi-square this many of its standard deviations above 1 calls for a search"""
LEAST_GAIN = 36.0
"""a line beside must take so many times what is left per degree of freedom off the chi-square"""
LEAST_SHARE = 0.4
"""and this share of what is more than noise: else the profile is odd in another way"""
ONE_SIDED = 3.0
"""and so many times what a line on the other side would take: a broad foot has two sides"""
NEAREST_WIDTHS = 0.8
STEP_PX = 0.5


def fits_badly(solution: Solution, *, sure: float = SURE) -> bool:
    """True if the folded profile is not what the model says by more than noise."""
    return solution.misfit > 1 + sure * math.sqrt(2 / solution.freedom)


def line_beside(fold: Fold, cosine: float, solution: Solution) -> Beside | None:
    """The line beside the arm that explains most of the misfit, or None."""
    shape = solution.shape
    nearest = NEAREST_WIDTHS * (2 * shape.half_width + 2 * shape.blur)
    reach = float(np.abs(fold.u).max()) + shape.half_width
    away = np.arange(nearest, reach, STEP_PX)
    if away.size == 0:
        return None
    distances = np.concatenate([-away[::-1], away])
    weight = np.sqrt(solution.weight * fold.n).ravel()
    residual = weight * (solution.left / fold.n).ravel()
    at = fold.u - cosine * solution.shift
    arm = line_profile(at, shape.half_width, shape.blur, cosine)
    absorbed = np.stack(
        [np.ones_like(at), at, arm.value, arm.by_u, arm.by_half_width, arm.by_blur], axis=-1
    )
    basis, _ = np.linalg.qr(absorbed.reshape(-1, 6) * weight[:, None])
    moved = at[None] - distances[:, None, None]
    lines = line_profile(moved, shape.half_width, shape.blur, cosine).value
    lines = lines.reshape(len(distances), -1) * weight
    lines = lines - (lines @ basis) @ basis.T
    size2 = np.einsum("dp,dp->d", lines, lines)
    pull = lines @ residual
    gain = np.where(size2 > 1e-6 * size2.max(), pull**2 / np.maximum(size2, 1e-300), 0.0)
    gain[pull * shape.contrast < 0] = 0.0
    best = int(gain.argmax())
    taken = float(gain[best])
    chi_square = solution.misfit * solution.freedom
    left = max(1.0, (chi_square - taken) / solution.freedom)
    least = max(
        LEAST_GAIN * left,
        LEAST_SHARE * (chi_square - solution.freedom),
        ONE_SIDED * float(gain[len(gain) - 1 - best]),
    )
    if taken < least:
        return None
    return Beside(float(pull[best] / size2[best] / shape.contrast), float(distances[best]))
