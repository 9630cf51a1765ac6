"""The noise of a pixel, from slices of an arm that see the same phase of its profile."""

from __future__ import annotations

import numpy as np

from readout.model import F64, QUANTISATION_VAR
from readout.sighting.fold import Fold
from readout.sighting.trial import State

BESIDE_SHARE = 0.02
"""where less than this share of the line's height is left, there is only ground"""


def slice_variance(fold: Fold, state: State, depth: int) -> F64:
    """Variance of a slice's pixel as a straight line in its light, (phases, columns).

    From the scatter of slices of one phase about their mean: what the model does not describe
    moves them all alike and does not count. The
    ground gives the variance in the dark, the line by how much light adds to it: both as ratios of
    sums, the best estimate where variances go with the light.
    """
    model = state.model
    freedom = (fold.n - 1) * fold.seen
    squares = (_about_model(fold, state) - state.left(fold) ** 2 / fold.n) * fold.seen
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


def _about_model(fold: Fold, state: State) -> F64:
    """Sums of squares of what the model leaves of each slice, (phases, columns), from the sums.

    A slice is off the mean of its phase by o = p + turn * a, which moves it by o times the flank:
    far more than its noise, so that each is moved back before it is squared.
    """
    of, turn, model = fold.of, state.turn, state.model
    ground, line, flank = model.ground, model.line, model.flank
    level_off = fold.level_cp + turn * fold.level_ca
    off, c_off = of.cp + turn * of.ca, of.c2p + turn * of.c2a
    off2 = of.c2p2 + turn * (2 * of.c2pa + turn * of.c2a2)
    return (
        fold.level2
        + ground * (fold.n * ground - 2 * fold.level + 2 * (of.c * line + off * flank))
        + line * (of.c2 * line - 2 * fold.level_c + 2 * c_off * flank)
        + flank * (off2 * flank - 2 * level_off)
    )
