"""One trial of the parameters of an arm, and what the model expects of a fold there."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np

from readout.model import F64
from readout.sighting.fold import Fold
from readout.sighting.profile import line_profile
from readout.sighting.shape import Shape


@dataclass(frozen=True, slots=True)
class Model:
    """The model at one step: what is expected, and its derivatives, (phases, columns) each.

    ``ground``: b + g u. ``line``: C P. ``columns`` (n, phases, columns): by the parameters of
    ``Shape.changed``, of which the first two are the ground's, and by shift.
    """

    ground: F64
    line: F64
    columns: F64

    @property
    def flank(self) -> F64:
        """Derivative by shift, levels per pixel."""
        return np.asarray(self.columns[-1])


@dataclass(frozen=True, slots=True)
class State:
    """Where the search for the best parameters stands, and what the model says there."""

    shape: Shape
    shift: float
    turn: float
    model: Model

    def left(self, fold: Fold) -> F64:
        """What is left of the sums of levels, (phases, columns)."""
        model = self.model
        off = self.turn * fold.of.ca + fold.of.cp
        return fold.level - fold.n * model.ground - fold.of.c * model.line - off * model.flank

    def cost(self, fold: Fold, weight: F64) -> float:
        """Weighted sum of squares of what is left of the folded profile."""
        return float(np.vdot(weight / fold.n, self.left(fold) ** 2))


def started(fold: Fold, cosine: float, shape: Shape) -> State | None:
    """The background, gradient and contrast that fit best for a width, blur and place.

    They are linear: separable least squares (Golub and Pereyra, SIAM J. Numer. Anal. 10 (1973)
    413), without weights.
    """
    shape = replace(shape, contrast=1.0).changed(np.zeros(7))
    value = model_of(fold, cosine, shape, 0.0).line
    columns = np.stack([np.ones_like(value), fold.u, value])
    normal, right = np.empty((3, 3)), np.empty(3)
    flat, seen = columns.reshape(3, -1), fold.seen
    normal[:2] = (columns[:2] * (seen * fold.n)).reshape(2, -1) @ flat.T
    normal[:2, 2] = normal[2, :2] = flat[:2] @ (value * seen * fold.of.c).ravel()
    normal[2, 2] = np.vdot(value, value * seen * fold.of.c2)
    right[:2] = flat[:2] @ (seen * fold.level).ravel()
    right[2] = np.vdot(value, seen * fold.level_c)
    try:
        linear = np.linalg.solve(normal, right).tolist()
    except np.linalg.LinAlgError:
        return None
    if not all(map(math.isfinite, linear)):
        return None
    levels = dict(zip(("background", "gradient", "contrast"), linear, strict=True))
    shape = replace(shape, **levels)
    return State(shape, 0.0, 0.0, model_of(fold, cosine, shape, 0.0))


def model_of(fold: Fold, cosine: float, shape: Shape, shift: float) -> Model:
    """What the shape makes one expect at a shift."""
    at = fold.u - cosine * shift
    arm = line_profile(at, shape.half_width, shape.blur, cosine)
    value, by_u, by_half_width, by_blur = arm.value, arm.by_u, arm.by_half_width, arm.by_blur
    extra: list[F64] = []
    if shape.beside is not None:
        height = shape.beside.height
        line = line_profile(at - shape.beside.distance, shape.half_width, shape.blur, cosine)
        value, by_u = value + height * line.value, by_u + height * line.by_u
        by_half_width = by_half_width + height * line.by_half_width
        by_blur = by_blur + height * line.by_blur
        extra = [shape.contrast * line.value, (-shape.contrast * height) * line.by_u]
    contrast = shape.contrast
    by_spread = by_blur * (contrast / (2 * shape.blur))
    by_fourth = by_half_width - by_blur * (shape.half_width / (3 * shape.blur))
    by_fourth = (by_fourth - value / shape.half_width) * (contrast / (4 * shape.half_width**3))
    columns = [np.ones_like(at), fold.u, value / (2 * shape.half_width), by_spread, by_fourth]
    return Model(
        shape.background + shape.gradient * fold.u,
        contrast * value,
        np.stack([*columns, *extra, (-contrast * cosine) * by_u]),
    )
