"""The noise of a pixel, from slices of an arm that see the same phase of its profile."""

from __future__ import annotations

import numpy as np

from readout.model import F64, QUANTISATION_VAR
from readout.sighting.fold import Fold
from readout.sighting.trial import Model, State

BESIDE_SHARE = 0.02
"""where less than this share of the line's height is left, there is only ground"""


def slice_variance(fold: Fold, state: State, depth: int) -> F64:
    """Variance of a slice's pixel as a straight line in its light, (phases, columns).

    From the scatter of slices of one phase about their mean: what the model does not describe
    moves them all alike and does not count. The known spread of their places is taken out. The
    ground gives the variance in the dark, the line by how much light adds to it: both as ratios of
    sums, the best estimate where variances go with the light.
    """
    model, of, turn = state.model, fold.of, state.turn
    freedom = fold.freedom * fold.seen
    places = of.c2p2 + turn * (2 * of.c2pa + turn * of.c2a2) - (of.cp + turn * of.ca) ** 2 / fold.n
    about_mean = _about_mean(fold, model) - model.flank**2 * places
    squares = about_mean * fold.seen
    total = float(freedom.sum())
    if total < 1:
        return np.ones_like(model.line)
    beside = freedom * (np.abs(model.line) < BESIDE_SHARE * np.abs(model.line).max())
    on_line = freedom - beside
    dark = float(np.vdot(squares, beside > 0)) / max(float(beside.sum()), 1.0)
    light = float(np.vdot(on_line, model.line))
    more = float(np.vdot(squares, on_line > 0)) - dark * float(on_line.sum())
    rise = more / light if light else 0.0
    mean = float(squares.sum()) / total
    return np.maximum(dark + rise * model.line, max(QUANTISATION_VAR / depth, 0.1 * mean))


def _about_mean(fold: Fold, model: Model) -> F64:
    """Sums of squares of the slices' levels about their mean, (phases, columns).

    Where their contrasts differ it is what the model leaves of each that scatters.
    """
    if not fold.contrasted:
        return fold.level2 - fold.level**2 / fold.n
    of = fold.of
    about_model = (
        fold.level2
        - 2 * (model.ground * fold.level + model.line * fold.level_c)
        + model.ground * (fold.n * model.ground + 2 * of.c * model.line)
        + of.c2 * model.line**2
    )
    return about_model - (fold.level - fold.n * model.ground - of.c * model.line) ** 2 / fold.n
