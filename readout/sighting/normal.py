"""The normal equations of a fold, rebuilt from its sums, and their damped inverse."""

from __future__ import annotations

import math

import numpy as np

from readout.model import F64
from readout.sighting.fold import Fold
from readout.sighting.trial import State

TINY = 1e-9
"""damping that keeps a singular matrix from being one and changes nothing else"""
HELD = 1e12
"""damping of a parameter that must not move"""
LEAST_COLUMN = 1e-50
"""a column of the Jacobian this small against the largest says nothing"""


def normal_equations(fold: Fold, state: State, weight: F64) -> tuple[F64, F64]:
    """J^T W J (n + 2, n + 2) and J^T W r (n + 2,), rebuilt from the sums; shift and turn last.

    Within a phase the line runs by p off the mean phase and by turn * a off the cut: both enter to
    first order, through the flank, as the shift.
    """
    model, of = state.model, fold.of
    columns, line, flank = model.columns, model.line, model.flank
    count = len(columns)
    flat, weighted = columns.reshape(count, -1), columns * weight
    flank_weighted = weighted[-1]
    normal, right = np.empty((count + 1, count + 1)), np.empty(count + 1)
    if fold.contrasted:
        normal[:2, :2] = (weighted[:2] * fold.n).reshape(2, -1) @ flat[:2].T
        normal[:2, 2:-1] = (weighted[:2] * of.c).reshape(2, -1) @ flat[2:].T
        normal[2:-1, :2] = normal[:2, 2:-1].T
        normal[2:-1, 2:-1] = (weighted[2:] * of.c2).reshape(count - 2, -1) @ flat[2:].T
    else:
        normal[:-1, :-1] = (weighted * fold.n).reshape(count, -1) @ flat.T
    normal[:2, -1] = normal[-1, :2] = flat[:2] @ (flank_weighted * of.ca).ravel()
    normal[2:-1, -1] = normal[-1, 2:-1] = flat[2:] @ (flank_weighted * of.c2a).ravel()
    normal[-1, -1] = (flank_weighted * flank * of.c2a2).sum()
    left = state.left(fold)
    left_c = left
    if fold.contrasted:
        left_c = fold.level_c - of.c * model.ground - of.c2 * line
        left_c -= (state.turn * of.c2a + of.c2p) * flank
    left_ca = fold.level_ca - of.ca * model.ground - of.c2a * line
    left_ca -= (state.turn * of.c2a2 + of.c2pa) * flank
    right[:2] = weighted[:2].reshape(2, -1) @ left.ravel()
    right[2:-1] = weighted[2:].reshape(count - 2, -1) @ left_c.ravel()
    right[-1] = np.vdot(flank_weighted, left_ca)
    return normal, right


def damped_inverse(normal: F64, damping: float, *, held: int | None = None) -> F64 | None:
    """Inverse of normal equations with columns of very different size; None if there is none.

    ``held``: a parameter that stays as it is.
    """
    scale = np.sqrt(normal.diagonal())
    if not scale.min() > LEAST_COLUMN * scale.max():
        return None
    scales = scale[:, None] * scale
    scaled = normal / scales
    scaled.flat[:: len(scale) + 1] += TINY
    scaled.flat[3 * (len(scale) + 1) : -1 : len(scale) + 1] += damping
    if held is not None:
        scaled[held, held] += HELD
    try:
        inverse = np.linalg.inv(scaled) / scales
    except np.linalg.LinAlgError:
        return None
    return inverse if math.isfinite(float(inverse.sum())) else None
