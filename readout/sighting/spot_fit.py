"""Weighted least squares on a window about a spot, robust, with the noise read from the window.

First all pixels count alike, until the shape stands; then each by its variance, residuals beyond
three sd cut to three and far ones left out: modified residuals (P. J. Huber, Robust Statistics,
1981, 7.8) that fade as those of F. R. Hampel (J. Am. Stat. Assoc. 69 (1974) 383). What is above the
sensor's range is left out by what the model expects there, not by what the noise made of it.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import cv2
import numpy as np

from readout.model import F64
from readout.sighting.disc import half_maximum
from readout.sighting.spot_model import (
    HEIGHT,
    MIDDLE,
    PARAMETERS,
    Mask,
    SpotShape,
    State,
    Window,
    best_state_of,
    columns_of,
    held,
    state_of,
    stepped,
)
from readout.sighting.spot_noise import (
    CUT_SD,
    Leftover,
    excess_variance,
    explained_share,
    known_from_few,
    lopsidedness,
    rough_variance,
    variance_line,
)

FADING_SD, LEFT_OUT_SD = 5.0, 9.0
"""a residual counts less from the first on and nothing beyond the second: without a step, so that
a spot of another shape does not jump with the noise"""
MOST_STEPS = 8
WEIGHTED_STEPS = 2
"""few on purpose: on a spot of another shape many steps would wander off to fit a part of it"""
DARK = 0.02
"""share of the height below which a pixel counts as ground"""
CALMED = 1.2
"""what smoothing adds to the second moments of a spot, in cells^2"""
SETTLED = 0.1
"""widths by which place and width may still change in the step before the weighted ones"""
USUAL_EDGE, USUAL_EDGE_SD = 1.0, 2.0

_NEIGHBOURS = np.array([[1, 1, 1], [1, 0, 1], [1, 1, 1]], np.uint8)
_SURE = np.array([1e-9] * 9 + [0.01])
_CAREFUL = np.array([1e-9] * 6 + [0.003] * 3 + [0.03])
"""Marquardt damping: of a disc smaller than its blur hardly more is seen than of the blur"""


@dataclass(frozen=True, slots=True)
class SpotFit:
    """A fitted spot; ``cov`` (2, 2) is the covariance of its middle, px^2.

    ``height_sd``: uncertainty of the height, levels. ``explained``: share of the structure in the
    window that the spot explains. ``pixel_sd``: noise of one pixel on the ground, levels.
    ``left_out``: share of the usable pixels that had to be left out as foreign. ``excess``: factor
    in ``cov`` for what the noise does not explain. ``lopsided_px``, ``lopsided_sds``: how far the
    spot's core and skirt disagree about its place, and in standard deviations.
    """

    shape: SpotShape
    cov: F64
    height_sd: float
    explained: float
    pixel_sd: float
    left_out: float
    excess: float
    lopsided_px: float
    lopsided_sds: float


@dataclass(frozen=True, slots=True)
class _Step:
    """One solution: change of the parameters, cofactor matrix, derivatives over the sd.

    ``below``: pixels below saturation; ``inside``: those of them that are used.
    """

    change: F64
    cofactor: F64
    rows: F64
    below: Mask
    inside: Mask


def first_look(window: Window) -> SpotShape | None:
    """A rough shape from the places above one half and above eight tenths of the height."""
    calm = cv2.GaussianBlur(cv2.medianBlur(window.levels.astype(np.float32), 3), (3, 3), 0)
    border = np.concatenate([calm[0], calm[-1], calm[:, 0], calm[:, -1]])
    ground = float(np.median(border))
    rows, columns = calm.shape
    inner = calm[rows // 4 : rows - rows // 4, columns // 4 : columns - columns // 4]
    height = float(inner.max(initial=ground)) - ground
    y, x = np.nonzero(calm > ground + 0.5 * height)
    if not height > 0 or x.size < 3:
        return None
    sharpness = math.sqrt(np.count_nonzero(calm > ground + 0.8 * height) / x.size)
    edge = min(0.84 / (1 - min(sharpness, 0.95)), 10.0) if sharpness > 0.6 else 1.0
    of_spread = half_maximum(edge) / math.sqrt(1 + edge**2 / 4)
    (xx, xy), (_, yy) = (np.cov(x, y) * (4 / of_spread**2)).tolist()
    sharper = max(1 - 2 * CALMED / (xx + yy), 0.3)
    moments = held(xx * sharper, xy * sharper, yy * sharper)
    middle = float(x.mean()), float(y.mean())
    return window.in_pixels(SpotShape(*middle, ground, 0.0, 0.0, height, moments, edge))


def settle(window: Window, start: SpotShape, *, ceiling: float) -> SpotShape | None:
    """The shape that fits best when all pixels count alike, or None: nothing is known of their
    noise as long as the shape is wrong. ``ceiling`` is the level at which pixels saturate.
    """
    shape = window.in_cells(start)
    columns = columns_of(_without_hot(window, shape), shape)
    if columns.x.size < 2 * PARAMETERS:
        return None
    for _ in range(MOST_STEPS):
        shape, state = best_state_of(columns, shape)
        if not shape.height > 0:
            return None
        below = state.model < ceiling
        rows = state.jacobian if below.all() else state.jacobian * below
        scatter = float(state.residual @ state.residual) / state.residual.size
        normal, right = _with_usual_edge(rows @ rows.T, rows @ state.residual, shape, scatter)
        cofactor = _inverse(normal, _CAREFUL)
        if cofactor is None:
            return None
        shape, moved = stepped(shape, cofactor @ right)
        if moved < SETTLED:
            break
    return window.in_pixels(shape)


def weigh(window: Window, settled: SpotShape, *, ceiling: float) -> SpotFit | None:
    """The fit with each pixel's own weight, from a settled shape; None where there is none."""
    shape = window.in_cells(settled)
    columns = columns_of(window, shape)
    state = state_of(columns, shape)
    variance, freedom = rough_variance(state, columns.least_variance), math.inf
    step = _solve(state, shape, variance, ceiling)
    for _ in range(WEIGHTED_STEPS):
        if step is None:
            return None
        shape, _ = stepped(shape, step.change)
        state = state_of(columns, shape)
        variance, freedom = variance_line(
            state, step.rows, step.cofactor, step.below, variance, columns.least_variance
        )
        step = _solve(state, shape, variance, ceiling)
    if step is None:
        return None
    left = state.residual - step.change @ state.jacobian
    shape, _ = stepped(shape, step.change)
    z = np.clip(left / np.sqrt(variance), -CUT_SD, CUT_SD) * step.inside
    dark = state.light < DARK * shape.height
    steady = np.maximum(1 - columns.least_variance / variance, 0.0)
    leftover = Leftover(z, step.rows, step.cofactor, dark, steady)
    excess = excess_variance(columns, shape, leftover)
    factor = excess * known_from_few(freedom)
    apart, apart_sds = lopsidedness(state, leftover)
    return SpotFit(
        shape=window.in_pixels(shape),
        cov=step.cofactor[MIDDLE, MIDDLE] * (factor * window.cell**2),
        height_sd=math.sqrt(step.cofactor[HEIGHT, HEIGHT] * factor),
        explained=explained_share(columns, shape, left, variance),
        pixel_sd=math.sqrt(float(np.min(variance))) * window.cell,
        left_out=1 - float(np.mean(step.inside)),
        excess=excess,
        lopsided_px=apart * window.cell,
        lopsided_sds=apart_sds,
    )


def _without_hot(window: Window, shape: SpotShape) -> Window:
    """Levels no farther above or below the eight neighbours than a spot of this width can be.

    The height of a first look is that of a smoothed picture, far too low for a narrow spot.
    """
    longer, shorter = shape.spreads_px
    most = shape.height * (1 + 2 / (longer * shorter))
    lowest, highest = cv2.erode(window.levels, _NEIGHBOURS), cv2.dilate(window.levels, _NEIGHBOURS)
    return replace(window, levels=np.clip(window.levels, lowest - most, highest + most))


def _solve(state: State, shape: SpotShape, variance: F64, ceiling: float) -> _Step | None:
    """One step of Gauss and Newton on modified residuals; None if the pixels cannot tell."""
    sd = np.sqrt(variance)
    z = state.residual / sd
    far = np.abs(z)
    below = state.model + CUT_SD * sd < ceiling
    inside = below & (far <= LEFT_OUT_SD)
    if np.count_nonzero(inside) < 2 * PARAMETERS:
        return None
    rows = state.jacobian * (inside / sd)
    if far.max() > CUT_SD:
        fading = np.minimum((LEFT_OUT_SD - far) / (LEFT_OUT_SD - FADING_SD), 1.0)
        z *= fading * (CUT_SD / np.maximum(far, CUT_SD))
    pull = rows @ z
    normal, right = _with_usual_edge(rows @ rows.T, pull, shape, 1.0)
    cofactor = _inverse(normal, _SURE)
    return None if cofactor is None else _Step(cofactor @ right, cofactor, rows, below, inside)


def _with_usual_edge(normal: F64, right: F64, shape: SpotShape, variance: float) -> tuple[F64, F64]:
    """Normal equations with what is known beforehand of a disc's radius, in units of its blur.

    In a dim picture it is not seen, and would follow the noise. The place does not depend on it.
    """
    knowledge = variance / USUAL_EDGE_SD**2
    normal[-1, -1] += knowledge
    right[-1] += knowledge * (USUAL_EDGE - shape.edge)
    return normal, right


def _inverse(normal: F64, damping: F64) -> F64 | None:
    """Inverse of normal equations damped after Marquardt, None if there is none."""
    diagonal = normal.diagonal()
    if not (diagonal.min() > 0 and math.isfinite(diagonal.sum())):
        return None
    scale = 1 / np.sqrt(diagonal)
    unit = normal * scale * scale[:, None]
    unit.flat[:: PARAMETERS + 1] += damping
    try:
        inverse = np.linalg.inv(unit) * scale * scale[:, None]
    except np.linalg.LinAlgError:
        return None
    return inverse if inverse.diagonal().min() > 0 and math.isfinite(inverse.sum()) else None
