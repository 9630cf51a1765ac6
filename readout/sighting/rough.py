"""What a search for the arms of a crosshair gives: lines that may be arms."""

from __future__ import annotations

from dataclasses import dataclass

from readout.sighting.fold import Line


@dataclass(frozen=True, slots=True)
class RoughArm:
    """A line seen in many bands: where, bright (1) or dark (-1), about how wide, px.

    ``strength``: the order in which to try them. It grows with the length of a line and with the
    logarithm of its contrast, and falls for gaps: the picture is cut into bands, and it is the
    sum of ln(height / 3 noise sd) over the bands where the line is seen, less half their median
    for each band between them where it is not.
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
