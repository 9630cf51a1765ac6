"""An arm looked at piece by piece: whether it is as bright and as straight as the fit takes it.

Each slice says, faintly, by how much background, contrast and place of the line differ there from
the fit: matched sums of its residuals. Slices are joined to sections, and the sections' values
compared with what the noise of their pixels allows. Independent noise gives a reduced chi-square
of 1. Uneven light, dust and ends of an arm show in background and contrast; noise that is
correlated from pixel to pixel, a crooked arm or something that crosses it show in the place.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from readout.least_squares import linear_least_squares
from readout.model import F64
from readout.sighting.fold import Fold, Strip
from readout.sighting.solve import Solution

SECTIONS = 64
LEAST_ROWS = 4
"""rows in a section, at least: correlation over fewer rows than this is seen in full"""
LIT, WHOLLY_LIT = 0.5, 0.93
"""shares of contrast below which a section is not the arm's, or lies across its end"""
JAGGED_SDS, JAGGED_SHARE = 2.2, 0.01
"""a ground is jagged if it bends by so many sds and by this share of the arm's contrast"""
SURE = 6.0
"""a reduced chi-square this many of its standard deviations above 1 is no noise"""


@dataclass(frozen=True, slots=True)
class Light:
    """How bright an arm is along itself: contrast relative to its mean, with its sd, by row."""

    rows: F64
    contrast: F64
    contrast_sd: F64
    uneven: bool

    def rise_at(self, row: float) -> tuple[float, float]:
        """Relative rise of the contrast per pixel at a row, and its sd.

        From a straight line through all sections, or a cubic where they are uneven; at the end of
        the arm for a row beyond it.
        """
        if not self.uneven:
            return _slope(self.rows, self.contrast, self.contrast_sd**-2)
        size = float(np.ptp(self.rows)) / 2
        middle = float(self.rows.min()) + size
        place = (self.rows - middle) / size
        at = min(max((row - middle) / size, -1.0), 1.0)
        fit = linear_least_squares(
            place[:, None] ** np.arange(4), self.contrast, self.contrast_sd**-2
        )
        rise = np.array([0.0, 1.0, 2 * at, 3 * at**2]) / size
        scatter = max(1.0, fit.residual_sd)
        return float(rise @ fit.parameters), scatter * math.sqrt(float(rise @ fit.cofactor @ rise))


@dataclass(frozen=True, slots=True)
class Sections:
    """Departures of each section from the fit, (sections,), with standard deviations from noise.

    ``along``: place, px. ``background``, ``contrast``: levels; ``gradient``: levels per pixel.
    ``shift``: px along x, about the straight line that fits the sections best. ``first``: first
    slice of each section, of ``slices`` in all. ``jagged``: whether the ground goes up and down
    from slice to slice, as where graduations cross the arm.
    """

    along: F64
    background: F64
    background_sd: F64
    gradient: F64
    contrast: F64
    contrast_sd: F64
    shift: F64
    shift_sd: F64
    first: NDArray[np.intp]
    slices: int
    jagged: bool

    @property
    def excess_variance(self) -> float:
        """Reduced chi-square of the shifts about a straight line, at least 1."""
        return max(1.0, _reduced(self.shift / self.shift_sd, 2))

    def at(self, along: F64, values: F64) -> F64:
        """Values of the sections drawn from middle to middle, at places along the arm."""
        return np.interp(along, self.along, values)

    def of_slices(self, values: NDArray[Any]) -> NDArray[Any]:
        """The value of its section for each slice."""
        return np.repeat(values, np.diff(np.append(self.first, self.slices)))

    def on_line(self, limit: float) -> NDArray[np.bool_]:
        """False for a section further off the line than ``limit`` sds, or of their usual scatter.

        The usual scatter is the median one: where all sections scatter, none is the culprit.
        """
        off = np.abs(self.shift / self.shift_sd)
        return off <= limit * max(1.0, 1.4826 * _quantile(off, 0.5))

    def lit(self, contrast: float) -> NDArray[np.bool_]:
        """False for a section where the arm is not, or only in part.

        One that surely has less than half of the best ones' contrast; and one beside it that has
        less than its neighbour on the other side. ``contrast``: the arm's, from which the
        sections' depart.
        """
        height = math.copysign(1.0, contrast) * (contrast + self.contrast)
        lit = height + 2 * self.contrast_sd >= LIT * _quantile(height, 0.9)
        for side in (1, -1):
            one, two = _shifted(lit, side), _shifted(height, -side)
            lit = lit & (one | (height >= WHOLLY_LIT * two))
        return lit

    @property
    def uneven(self) -> bool:
        """True if background or contrast vary along the arm by more than noise."""
        least = 1 + SURE * math.sqrt(2 / len(self.along))
        return (
            _reduced(self.contrast / self.contrast_sd, 1) > least
            or _reduced(self.background / self.background_sd, 1) > least
        )


def _shifted(values: NDArray[Any], by: int) -> NDArray[Any]:
    """The value of the next section (-1) or of the one before (1); its own at the end."""
    return np.append(values[:1], values[:-1]) if by > 0 else np.append(values[1:], values[-1:])


def _quantile(values: F64, share: float) -> float:
    """The value that a share of them does not exceed; numpy's own takes ten times as long."""
    return float(np.sort(values)[int(share * (len(values) - 1))])


def _reduced(scaled: F64, parameters: int) -> float:
    return float(scaled @ scaled) / max(len(scaled) - parameters, 1)


def sections_of(
    strip: Strip, residual: F64, contrast: F64, fold: Fold, solution: Solution
) -> Sections | None:
    """What each section says for itself; None of an arm too short for sections.

    Each slice is solved with the templates of its phase, and the slices of a section are averaged,
    for the shift with the square of their contrast.
    """
    slices = len(strip.rows)
    sections = min(SECTIONS, slices * strip.depth // LEAST_ROWS, slices)
    if sections < 8:
        return None
    first = np.arange(sections) * slices // sections
    templates = np.stack(
        [np.ones_like(fold.u), fold.u, solution.line / solution.shape.contrast, solution.flank],
        axis=-1,
    )
    weighted = templates * solution.weight[:, :, None]
    cov = _inverses(np.swapaxes(weighted, 1, 2) @ templates)
    matched = np.ascontiguousarray(np.moveaxis(weighted @ cov, 2, 0))
    of_slice = [np.einsum("sc,sc->s", residual, match[fold.group]) for match in matched]
    var = np.einsum("pii->pi", cov)[fold.group]
    count = np.diff(np.append(first, slices))[:, None]
    weight = np.ones((slices, 4))
    weight[:, 3] = contrast
    total = np.add.reduceat(weight**2, first, axis=0)
    value = np.add.reduceat(weight * np.stack(of_slice, axis=1), first, axis=0) / total
    sd = np.sqrt(np.add.reduceat(weight**2 * var, first, axis=0)) / total
    along = np.add.reduceat(strip.along, first) / count[:, 0]
    return Sections(
        along,
        value[:, 0],
        sd[:, 0],
        value[:, 1],
        value[:, 2],
        sd[:, 2],
        _about_line(along, value[:, 3], sd[:, 3]),
        sd[:, 3],
        first,
        slices,
        _jagged(of_slice[0], var[:, 0], solution.shape.contrast),
    )


def _jagged(ground: F64, var: F64, contrast: float) -> bool:
    """True if the ground of slices bends up and down by more than noise all along the arm.

    Judged by the second differences that 3 in 10 exceed, so that some dust is none, nor a slope.
    """
    bend = _quantile(np.abs(np.diff(ground, 2)), 0.7) / 1.036
    sd = math.sqrt(6 * _quantile(var, 0.5))
    return bend > JAGGED_SDS * sd and bend > JAGGED_SHARE * abs(contrast)


def _inverses(normal: F64) -> F64:
    """Inverses of small matrices (n, 4, 4), huge where nothing is seen."""
    size = np.einsum("pii->pi", normal)
    size = np.sqrt(np.where(size > 0, size, 1.0))
    sizes = size[:, :, None] * size[:, None, :]
    return np.linalg.inv(normal / sizes + 1e-9 * np.eye(normal.shape[-1])) / sizes


def _about_line(along: F64, value: F64, sd: F64) -> F64:
    """Values less the weighted straight line through them."""
    weight = sd**-2
    middle = float(weight @ along) / float(weight.sum())
    mean = float(weight @ value) / float(weight.sum())
    return value - mean - _slope(along, value, weight)[0] * (along - middle)


def _slope(along: F64, value: F64, weight: F64) -> tuple[float, float]:
    """Slope of the weighted straight line through values, and its standard deviation."""
    middle = float(weight @ along) / float(weight.sum())
    arm = weight * (along - middle)
    size = max(float(arm @ along), 1e-300)
    return float(arm @ value) / size, 1 / math.sqrt(size)
