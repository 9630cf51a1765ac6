"""One arm: cut a strip along it, solve, cut anew along the better line until it rests."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from readout.model import F64, Pixels
from readout.sighting.fold import Line, Strip, cut_strip, fold_strip
from readout.sighting.scatter import excess_variance
from readout.sighting.solve import Shape, Solution, solve_fold

CUTS = 6
SETTLED_PX = 0.01
SMOOTHED_ROWS = 15
LIT = 0.4
"""an arm ends where its height falls below this share of its best"""


@dataclass(frozen=True, slots=True)
class ArmFit:
    """A fitted arm: its line, the covariance of (middle_x, slope), its shape, and how it fits.

    ``explained``: share of the folded profile's variance that the model explains. ``pixel_sd``:
    typical noise of a pixel, levels. ``excess``: factor on the covariance for what the pixels'
    noise does not explain. ``rows``: rows used.
    """

    line: Line
    cov: F64
    shape: Shape
    explained: float
    pixel_sd: float
    excess: float
    rows: int
    strip: Strip

    def x_var_at(self, y: float) -> float:
        """Variance of the line's x at row ``y``, px^2."""
        along = np.array([1.0, y - self.line.middle_y])
        return float(along @ self.cov @ along)


def fit_arm(
    pixels: Pixels,
    line: Line,
    shape: Shape,
    *,
    skip_from: float = math.inf,
    skip_to: float = -math.inf,
) -> ArmFit | None:
    """Fit an upright arm near ``line``; for a level one pass the transposed picture.

    ``shape`` is a rough start. Rows from ``skip_from`` to ``skip_to`` are left out. Returns None
    where no arm can be fitted: never raises on a bad picture.
    """
    fit = None
    for _ in range(CUTS):
        half_columns = math.ceil(1.25 * shape.reach_px + 2)
        strip = cut_strip(pixels, line, half_columns, skip_from=skip_from, skip_to=skip_to)
        strip = None if strip is None else _lit(strip, shape)
        if strip is None:
            return None
        fold = fold_strip(strip)
        solution = solve_fold(fold, strip.line.cosine, shape)
        if solution is None or abs(solution.shift) > half_columns:
            return None
        settled = abs(solution.shift) + abs(solution.turn) * np.abs(strip.along).max() < SETTLED_PX
        excess = excess_variance(strip, fold, solution) if settled else 1.0
        fit = _improved(strip, solution, excess)
        line, shape = fit.line, solution.shape
        if settled:
            break
    return fit


def _improved(strip: Strip, solution: Solution, excess: float) -> ArmFit:
    old = strip.line
    return ArmFit(
        line=Line(old.middle_x + solution.shift, old.slope + solution.turn, old.middle_y),
        cov=solution.cov * excess,
        shape=solution.shape,
        explained=solution.explained,
        pixel_sd=solution.pixel_sd,
        excess=excess,
        rows=len(strip.rows),
        strip=strip,
    )


def _lit(strip: Strip, shape: Shape) -> Strip | None:
    """The rows in which the arm is there (a reticle may be shorter than the picture), the line
    referred to their middle, where position and slope are least correlated.
    """
    across = np.abs(strip.offsets[None, :] - strip.phase[:, None]) * strip.line.cosine
    core = across <= max(1.0, shape.half_width)
    away = across >= min(shape.reach_px, 0.8 * across.max())
    height = _row_means(strip.levels, core) - _row_means(strip.levels, away)
    width = min(SMOOTHED_ROWS, len(height) // 2 * 2 - 1)
    padded = np.pad(height, width // 2, mode="edge")
    smooth = np.convolve(padded, np.full(width, 1 / width), "valid")
    smooth *= math.copysign(1.0, shape.contrast)
    keep = smooth > LIT * np.percentile(smooth, 95)
    return strip.only(keep).about_its_middle() if keep.sum() >= 8 else None


def _row_means(levels: F64, where: NDArray[np.bool_]) -> F64:
    """Mean of each row over the places marked, 0 for a row without any."""
    return np.asarray((levels * where).sum(axis=1) / np.maximum(where.sum(axis=1), 1))
