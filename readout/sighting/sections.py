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
        size = float(np.ptp(self.rows)) / 2
        middle = float(self.rows.min()) + size
        place = (self.rows - middle) / size
        at = min(max((row - middle) / size, -1.0), 1.0)
        powers = np.arange(4 if self.uneven else 2)
        design = place[:, None] ** powers / self.contrast_sd[:, None]
        fit = linear_least_squares(design, self.contrast / self.contrast_sd)
        rise = np.array([0.0, 1.0, 2 * at, 3 * at**2])[: len(powers)] / size
        scatter = max(1.0, fit.residual_sd)
        return float(rise @ fit.parameters), scatter * math.sqrt(float(rise @ fit.cofactor @ rise))


@dataclass(frozen=True, slots=True)
class Sections:
    """Departures of each section from the fit, (sections,), with standard deviations from noise.

    ``along``: place, px. ``background``, ``contrast``: levels; ``gradient``: levels per pixel.
    ``shift``: px along x, about the straight line that fits the sections best. ``first``: first
    slice of each section, of ``slices`` in all.
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
        return off <= limit * max(1.0, 1.4826 * float(np.median(off)))

    def lit(self, contrast: float, share: float) -> NDArray[np.bool_]:
        """False for a section that surely has less than ``share`` of the best ones' contrast.

        ``contrast``: the arm's, from which the sections' depart.
        """
        height = math.copysign(1.0, contrast) * (contrast + self.contrast)
        return height + 2 * self.contrast_sd >= share * np.percentile(height, 90)

    @property
    def uneven(self) -> bool:
        """True if background or contrast vary along the arm by more than noise."""
        least = 1 + SURE * math.sqrt(2 / len(self.along))
        return (
            _reduced(self.contrast / self.contrast_sd, 1) > least
            or _reduced(self.background / self.background_sd, 1) > least
        )


def _reduced(scaled: F64, parameters: int) -> float:
    return float(scaled @ scaled) / max(len(scaled) - parameters, 1)


def sections_of(
    strip: Strip, residual: F64, contrast: F64, fold: Fold, solution: Solution
) -> Sections | None:
    """What each section says for itself; None of an arm too short for sections."""
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
    of_phase = np.swapaxes(weighted, 1, 2) @ templates
    scale = np.ones((slices, 4))
    scale[:, 3] = contrast
    pull = scale * (residual[:, None, :] @ weighted[fold.group])[:, 0, :]
    normal = of_phase[fold.group] * (scale[:, :, None] * scale[:, None, :])
    value, cov = _solved(
        np.add.reduceat(normal, first, axis=0), np.add.reduceat(pull, first, axis=0)
    )
    sd = np.sqrt(np.einsum("sii->si", cov))
    along = np.add.reduceat(strip.along, first) / np.diff(np.append(first, slices))
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
    )


def _solved(normal: F64, pull: F64) -> tuple[F64, F64]:
    """Solutions (n, 4) and covariances (n, 4, 4) of n small systems, huge where nothing is seen."""
    size = np.einsum("sii->si", normal)
    size = np.sqrt(np.where(size > 0, size, 1.0))
    sizes = size[:, :, None] * size[:, None, :]
    cov = np.linalg.inv(normal / sizes + 1e-9 * np.eye(normal.shape[-1])) / sizes
    return (cov @ pull[:, :, None])[:, :, 0], cov


def _about_line(along: F64, value: F64, sd: F64) -> F64:
    """Values less the weighted straight line through them."""
    weight = sd**-2
    middle = float(weight @ along) / float(weight.sum())
    arm = along - middle
    mean = float(weight @ value) / float(weight.sum())
    slope = float(weight @ (arm * value)) / max(float(weight @ arm**2), 1e-300)
    return value - mean - slope * arm
