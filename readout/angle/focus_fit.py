"""Where along the screw the line is sharpest: the lowest point of a parabola.

The square of the line's spread grows with the square of the distance z - z0 from best focus,

    spread^2 = A + B z + C z^2,   z0 = -B / 2C,

exactly so for the variance of the light (``focus``). What is seen of a strongly defocused line,
fitted as if its blur were a Gaussian, is less exact: where enough of them remain, only samples
up to twice the least spread count, each as known to the same share of itself.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from scipy.special import stdtrit

from readout.angle.focus import FocusSample
from readout.errors import BadInput
from readout.least_squares import linear_least_squares
from readout.model import F64
from readout.rows import rounded
from readout.units import decimals_for

LEAST_POSITIONS = 4
ENOUGH_POSITIONS = 6
NEAR = 2.0
"""Samples up to this many times the least spread are near, if there are enough of them."""
CURVED = 0.999
"""Confidence with which the trace must be shown to turn up again on both sides."""


@dataclass(frozen=True, slots=True)
class BestFocus:
    """The sharpest place of one arm.

    ``position_u_mm``: standard uncertainty from the scatter about the parabola, with ``freedom``
    degrees of freedom. ``least_px``: the spread there. ``bracketed``: samples on both sides of it.
    """

    position_mm: float
    position_u_mm: float
    freedom: int
    least_px: float
    bracketed: bool

    @property
    def expanded_u_mm(self) -> float:
        """Half the width of the interval that holds the place with 95 % confidence."""
        return float(stdtrit(self.freedom, 0.975)) * self.position_u_mm


@dataclass(frozen=True, slots=True)
class FocusFit:
    """The sharpest places of the two arms, None for one without a trace, and the one to set."""

    upright: BestFocus | None
    level: BestFocus | None

    @property
    def position_mm(self) -> float:
        """Midway between the arms' own."""
        return float(np.mean([arm.position_mm for arm in self._arms]))

    @property
    def expanded_u_mm(self) -> float:
        """Half the width of the 95 % interval of ``position_mm``."""
        arms = self._arms
        return math.hypot(*(arm.expanded_u_mm for arm in arms)) / len(arms)

    @property
    def apart_mm(self) -> float:
        """Level arm's place minus the upright one's, NaN where only one was seen."""
        if self.upright is None or self.level is None:
            return math.nan
        return self.level.position_mm - self.upright.position_mm

    @property
    def astigmatic(self) -> bool:
        """True if the arms have been shown to be sharpest at different places."""
        return abs(self.apart_mm) > math.hypot(*(arm.expanded_u_mm for arm in self._arms))

    @property
    def _arms(self) -> list[BestFocus]:
        return [arm for arm in (self.upright, self.level) if arm is not None]

    def words(self) -> tuple[str, ...]:
        """What to say to the person who turns the screw."""
        decimals = decimals_for(self.expanded_u_mm, most=3)
        place = f"{round(self.position_mm, decimals) + 0.0:.{decimals}f} mm"  # no negative zero
        if all(arm.bracketed for arm in self._arms):
            first = f"sharpest at {place} ± {self.expanded_u_mm:.{decimals}f} mm (95 %): set it so"
        else:
            first = (
                f"sharpest beyond the places tried, perhaps at {place}: go on that way until the "
                "line widens again"
            )
        if not self.astigmatic:
            return (first,)
        second = (
            f"the arms are sharpest {abs(self.apart_mm):.{decimals}f} mm apart, as behind a tilted "
            "plate or a strained lens: the middle serves both"
        )
        return (first, second)

    def document(self) -> dict[str, Any]:
        """As JSON."""
        return {
            "position_mm": rounded(self.position_mm),
            "expanded_u_mm": rounded(self.expanded_u_mm),
            "upright": _arm_document(self.upright),
            "level": _arm_document(self.level),
            "apart_mm": rounded(self.apart_mm),
            "astigmatic": self.astigmatic,
            "words": list(self.words()),
        }


def fit_focus(samples: Sequence[FocusSample]) -> FocusFit:
    """The sharpest place from samples with positions; those without are left out.

    Raises BadInput, one line, where fewer than four places were tried or no minimum shows.
    """
    placed = [sample for sample in samples if sample.position_mm is not None]
    position = np.array([sample.position_mm for sample in placed], dtype=np.float64)
    if np.unique(position).size < LEAST_POSITIONS:
        raise BadInput(
            f"{np.unique(position).size} positions of the screw tell no minimum: give the width at "
            f"{LEAST_POSITIONS} or more, on both sides of the sharpest"
        )
    arms: list[BestFocus | None] = []
    for name, spread in (
        ("upright", np.array([sample.upright_px for sample in placed])),
        ("level", np.array([sample.level_px for sample in placed])),
    ):
        seen = np.isfinite(spread)
        enough = np.unique(position[seen]).size >= LEAST_POSITIONS
        arms.append(_fit_arm(name, position[seen], spread[seen]) if enough else None)
    if arms[0] is None and arms[1] is None:
        raise BadInput(
            f"no arm was seen at {LEAST_POSITIONS} positions: stay where the line is in view"
        )
    return FocusFit(arms[0], arms[1])


def _near(position_mm: F64, spread_px: F64) -> tuple[F64, F64]:
    near = spread_px <= NEAR * spread_px.min()
    if np.unique(position_mm[near]).size < ENOUGH_POSITIONS:
        return position_mm, spread_px
    return position_mm[near], spread_px[near]


def _fit_arm(name: str, position_mm: F64, spread_px: F64) -> BestFocus:
    position_mm, spread_px = _near(position_mm, spread_px)
    middle = position_mm.mean()
    reach = float(np.abs(position_mm - middle).max())
    z = (position_mm - middle) / reach
    square = spread_px**2
    fit = linear_least_squares(np.stack([np.ones_like(z), z, z * z], axis=1), square, square**-2)
    a, b, c = fit.parameters
    freedom = len(z) - 3
    sd = fit.parameters_sd
    if not c > float(stdtrit(freedom, CURVED)) * sd[2]:
        sharpest = position_mm[np.argmin(square)]
        raise BadInput(
            f"no minimum of the {name} arm shows between {position_mm.min():g} and "
            f"{position_mm.max():g} mm: go on beyond {sharpest:g} mm, where its line was thinnest, "
            "until it widens again"
        )
    z0 = -b / (2 * c)
    gradient = np.array([0.0, -1 / (2 * c), b / (2 * c * c)])
    u = math.sqrt(float(gradient @ fit.cofactor @ gradient)) * fit.residual_sd
    return BestFocus(
        position_mm=float(middle + reach * z0),
        position_u_mm=reach * u,
        freedom=freedom,
        least_px=math.sqrt(max(0.0, a - b * b / (4 * c))),
        bracketed=bool(z.min() < z0 < z.max()),
    )


def _arm_document(arm: BestFocus | None) -> dict[str, Any] | None:
    if arm is None:
        return None
    return {
        "position_mm": rounded(arm.position_mm),
        "position_u_mm": rounded(arm.position_u_mm),
        "freedom": arm.freedom,
        "least_px": rounded(arm.least_px),
        "bracketed": arm.bracketed,
    }
