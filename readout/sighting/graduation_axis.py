"""The direction of a scale: the line its marks stand on, or else square to the marks.

Between two marks there is little but that line. Each piece of it is fitted as a short mark that
lies the other way; a straight line through the pieces gives the direction. What the flanks of marks
close together add is alike in all pieces: it moves the line, not its direction.
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from readout.least_squares import linear_least_squares
from readout.model import F64, Pixels
from readout.sighting.graduation_marks import RoughMarks, fit_marks
from readout.sighting.graduation_view import View
from readout.sighting.shape import Shape

LEAST_PIECE_PX = 4.0
FLANK_BLURS = 1.5
CLOSE = 1.5
"""on the uncertainty where flanks of marks reach into the pieces: those of longer marks differ"""
LEAST_PIECES = 4
SURE = 8.0
"""a line is one if it is so many sds of the noise high, in the mean over all gaps"""


def axis_slope(
    pixels: Pixels,
    view: View,
    columns: F64,
    rows: tuple[float, float],
    shape: Shape,
    *,
    polarity: int,
    seen: NDArray[np.bool_],
    full_scale: float,
) -> tuple[float, float] | None:
    """Slope of the line against the view's rows and its sd; None where there is no line.

    ``columns`` (n,): of the marks; ``rows``: between which the line is sought; ``polarity``: that
    of the marks, which are engraved with it.
    """
    step = np.diff(columns)
    usual = float(np.median(step))
    half_gap = max(usual / 2 - shape.fades_px, LEAST_PIECE_PX / 2)
    if half_gap > usual / 2 - shape.half_width - FLANK_BLURS * shape.blur:
        return None
    middle = ((columns[1:] + columns[:-1]) / 2)[step < 1.5 * usual]
    row = _row_of_line(view, middle, half_gap, rows, polarity)
    if row is None:
        return None
    place = view.places(middle, np.full(middle.size, row))
    fit = fit_marks(
        pixels,
        RoughMarks(
            place[:, 0],
            place[:, 1],
            view.turn_rad + math.pi / 2,
            np.full(middle.size, -half_gap),
            np.full(middle.size, half_gap),
            shape.fades_px + 3,
            shape,
        ),
        usable=seen,
        full_scale=full_scale,
    )
    if fit is None or np.count_nonzero(fit.fitted) < LEAST_PIECES:
        return None
    good = fit.fitted
    at = middle[good] - middle[good].mean()
    line = linear_least_squares(
        np.stack([np.ones_like(at), at], axis=1),
        fit.shift_px[good],
        1 / np.diag(fit.cov_px2)[good],
    )
    excess = max(1.0, line.residual_sd)
    if half_gap > usual / 2 - shape.fades_px:
        excess *= CLOSE
    return float(line.parameters[1]), math.sqrt(line.cofactor[1, 1]) * excess


def _row_of_line(
    view: View, middle: F64, half_gap: float, rows: tuple[float, float], polarity: int
) -> float | None:
    """The row in which the gaps are darkest (``polarity`` -1) or brightest (1)."""
    first, last = max(0, math.floor(rows[0])), min(len(view.levels) - 1, math.ceil(rows[1]))
    off = np.arange(-math.floor(half_gap), math.floor(half_gap) + 1)
    at = np.rint(middle)[:, None] + off
    inside = (at >= 0) & (at < view.levels.shape[1])
    at = np.clip(at, 0, view.levels.shape[1] - 1).astype(np.intp)
    band = view.levels[first : last + 1][:, at]
    there = view.inside[first : last + 1][:, at] & inside
    count = there.sum(axis=(1, 2))
    if last - first < 6 or count.min() == 0:
        return None
    profile = np.where(there, band, 0.0).sum(axis=(1, 2)) / count
    ground = float(np.median(profile))
    noise = 1.4826 * float(np.median(np.abs(np.diff(profile)))) / math.sqrt(2)
    best = int(np.argmax(polarity * profile))
    if polarity * (profile[best] - ground) < SURE * max(noise, 0.05):
        return None
    return float(first + best)
