"""What a search for the arms of a crosshair gives: lines that may be arms."""

from __future__ import annotations

from dataclasses import dataclass

from readout.sighting.fold import Line


@dataclass(frozen=True, slots=True)
class RoughArm:
    """A line seen in many bands: where, bright (1) or dark (-1), about how wide, px.

    ``strength``: sum over the bands it is seen in of ln(1 + height / noise sd), so that a long
    line goes before a short one and a bright one before a faint one.
    """

    line: Line
    polarity: int
    width_px: float
    strength: float


@dataclass(frozen=True, slots=True)
class RoughArms:
    """Rough arms of both polarities, strongest first.

    A level arm's line is that of the transposed picture.
    """

    uprights: tuple[RoughArm, ...]
    levels: tuple[RoughArm, ...]
