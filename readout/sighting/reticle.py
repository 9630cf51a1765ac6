"""A picture in which the arms of a reticle are fitted: each where it is sought, or not at all."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from readout.sighting.arm import ArmFit, fit_arm
from readout.sighting.crossing import Cross, crossing
from readout.sighting.fold import Line, Shadow
from readout.sighting.pairing import LEAST_SQUARE_DEG, angle_deg
from readout.sighting.shape import Shape

LEAST_EXPLAINED = 0.7
"""share of a folded strip that a crosshair arm must explain, else it is something else"""
LARGEST_SD_PX = 0.5
"""a position less certain than this is none"""
LEAST_LENGTH_WIDTHS = 4.0
"""a thing shorter than this many of its widths is a blob, not an arm"""
LEAST_SDS = 10.0
"""an arm's height is so many times its own noise: a search of noise alone was seen to find 7"""
SPARSE = 8
SLACK_PX = 0.5
"""left out beside the other arm, so that a small move needs no second fit"""


@dataclass(frozen=True, slots=True)
class Picture:
    """A picture, the level at which its pixels are full, and those that are not to be used."""

    pixels: NDArray[Any]
    full_scale: float
    unusable: NDArray[np.bool_] | None = None

    @property
    def searchable(self) -> NDArray[Any]:
        """The picture for a search: no pixel stands out that is not to be used."""
        if self.unusable is None:
            return self.pixels
        cleaned = self.pixels.copy()
        cleaned[self.unusable] = np.median(self.pixels[::SPARSE, ::SPARSE])
        return cleaned

    def fit(
        self,
        line: Line,
        shape: Shape,
        *,
        is_level: bool,
        known: bool = False,
        shadow: Shadow | None = None,
    ) -> ArmFit | None:
        """A credible fit of an arm without what lies in the shadow of another, or None."""
        unusable = self.unusable
        if unusable is not None and is_level:
            unusable = unusable.T
        fit = fit_arm(
            self.pixels.T if is_level else self.pixels,
            line,
            shape,
            known=known,
            full_scale=self.full_scale,
            unusable=unusable,
            shadow=shadow,
        )
        return fit if fit is not None and _credible(fit) else None

    def fit_both(
        self,
        upright: Line,
        level: Line,
        upright_shape: Shape,
        level_shape: Shape,
        *,
        known: bool = False,
    ) -> Cross | None:
        """Fit each arm without the stretch where the other one crosses it; None unless both hold.

        ``known``: the shapes are near in all they say, else only in width and polarity.
        The first arm is fitted once more if the second, now known, reaches into what was taken.
        """
        over = Shadow(level, level_shape.fades_px + SLACK_PX)
        first = self.fit(upright, upright_shape, is_level=False, known=known, shadow=over)
        if first is None:
            return None
        over_second = Shadow(first.line, first.shape.fades_px)
        second = self.fit(level, level_shape, is_level=True, known=known, shadow=over_second)
        if second is None or first.shape.contrast * second.shape.contrast < 0:
            return None
        if angle_deg(first.line, second.line) < LEAST_SQUARE_DEG:
            return None
        there = np.array(crossing(first.line, second.line))
        moved = float(over.distance(there[0], there[1])) + second.shape.fades_px
        if moved > over.reach_px:
            over = Shadow(second.line, second.shape.fades_px)
            first = self.fit(first.line, first.shape, is_level=False, known=True, shadow=over)
        return None if first is None else Cross(first, second)


def _credible(fit: ArmFit) -> bool:
    return bool(
        fit.explained > LEAST_EXPLAINED
        and fit.rows > LEAST_LENGTH_WIDTHS * fit.width_px
        and abs(fit.peak_contrast) * math.sqrt(fit.rows * fit.width_px) > LEAST_SDS * fit.pixel_sd
        and math.sqrt(fit.cov[0, 0]) < LARGEST_SD_PX
        and np.all(np.isfinite(fit.cov))
    )
