"""The nudge test and the foil test: which way the axes run, shown and not assumed.

Pressed at its top edge towards the instrument the mirror tilts to growing Y, at its right edge to
growing X. A foil under the higher-station foot of a carriage lifts its far end: Y grows by
arcsin(thickness / base), which shows the scale as well. 0.05 mm under 100 mm are 103.1″.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from enum import StrEnum
from typing import Any

import numpy as np

from readout.angle.axes import with_axes
from readout.angle.calibration import Calibration
from readout.angle.scales import ScaleVerdict, judge_ratio
from readout.errors import BadInput
from readout.model import F64
from readout.units import ARCSEC_PER_RAD, signed

CLEAR_SD = 5.0
"""a change counts where it is so many times its uncertainty"""
LEAST_ARCSEC = 0.5
"""a smaller one happens by itself: air, a hand on the table"""
CLEAR_OF_OTHER = 2.0
"""and so many times what the other axis shows"""
UNPROVEN = "signs unproven"


class Direction(StrEnum):
    """How a change seen compares with the one that was made."""

    RIGHT = "right"
    MIRRORED = "mirrored"
    """the right axis, backwards"""
    SWAPPED = "swapped"
    """the other axis: the camera stands on its side, or X and Y were mistaken"""
    UNCLEAR = "unclear"
    """too small, or between the axes"""


@dataclass(frozen=True, slots=True)
class Change:
    """Difference of two readings, with its standard uncertainties from noise."""

    x_arcsec: float
    y_arcsec: float
    x_sd_arcsec: float
    y_sd_arcsec: float

    @property
    def values(self) -> tuple[float, float]:
        return self.x_arcsec, self.y_arcsec

    @property
    def sds(self) -> tuple[float, float]:
        return self.x_sd_arcsec, self.y_sd_arcsec


@dataclass(frozen=True, slots=True)
class SignVerdict:
    """One test. ``made``: axis that was moved to growing tilt (0 X, 1 Y); ``seen`` and ``sign``:
    axis and direction that moved, None where unclear. ``how`` says which test, ``scale`` what a
    foil says of the scale, ``turn_deg`` by how much the change lies off its axis, X towards Y.
    """

    how: str
    made: int
    seen: int | None
    sign: int
    direction: Direction
    change: Change
    text: str
    scale: ScaleVerdict | None = None
    turn_deg: float = math.nan


@dataclass(frozen=True, slots=True)
class Foil:
    """A foil under the higher-station one of two feet ``base_mm`` apart, with uncertainties."""

    thickness_mm: float
    base_mm: float
    thickness_sd_mm: float = 0.0
    base_sd_mm: float = 0.0

    def __post_init__(self) -> None:
        if not 0 < self.thickness_mm < self.base_mm:
            raise BadInput(
                f"a foil of {self.thickness_mm:g} mm under feet {self.base_mm:g} mm apart cannot "
                "be: check which is which"
            )

    @property
    def tilt_arcsec(self) -> float:
        """Y of the carriage with the foil less Y without: arcsin(thickness / base)."""
        return math.asin(self.thickness_mm / self.base_mm) * ARCSEC_PER_RAD

    @property
    def rel_sd(self) -> float:
        """Relative standard uncertainty of ``tilt_arcsec``, for small angles."""
        return math.hypot(self.thickness_sd_mm / self.thickness_mm, self.base_sd_mm / self.base_mm)


def judge_nudge(edge: str, change: Change) -> SignVerdict:
    """The mirror's ``edge`` ("top", "right") was pressed towards the instrument.

    Raises BadInput for an edge that is neither.
    """
    if edge not in ("top", "right"):
        raise BadInput(f"the pressed edge is {edge or 'empty'}: press the top or the right one")
    return _judge(f"{edge} edge pressed towards the instrument", int(edge == "top"), change)


def judge_foil(foil: Foil, change: Change) -> SignVerdict:
    """The foil was put under the far foot: direction, scale and camera's turn in one test."""
    found = _judge(
        f"foil of {foil.thickness_mm:g} mm under the far foot of {foil.base_mm:g} mm", 1, change
    )
    if found.seen is None:
        return found
    size = abs(change.values[found.seen])
    ratio = size / foil.tilt_arcsec
    ratio_u = ratio * math.hypot(foil.rel_sd, change.sds[found.seen] / size)
    scale = judge_ratio(ratio, ratio_u)
    across = change.values[0]
    turn_deg = math.degrees(math.atan2(-across, change.y_arcsec)) if found.seen == 1 else math.nan
    text = f"{found.text}; {size:.1f}″ seen where {foil.tilt_arcsec:.1f}″ were made, {scale.text}"
    return replace(found, text=text, scale=scale, turn_deg=turn_deg)


def axes_shown(verdicts: Sequence[SignVerdict]) -> F64 | None:
    """What makes true slopes of those shown, (2, 2) of 0 and ±1; None until both axes are shown.

    Raises BadInput where two tests contradict each other.
    """
    axes = np.zeros((2, 2))
    for verdict in verdicts:
        if verdict.seen is None:
            continue
        row = np.zeros(2)
        row[verdict.seen] = verdict.sign
        if np.any(axes[verdict.made]) and not np.array_equal(axes[verdict.made], row):
            raise BadInput(
                f"two tests of {'XY'[verdict.made]} contradict each other, one of them: "
                f"{verdict.text}; do both again"
            )
        axes[verdict.made] = row
    if not np.any(axes, axis=1).all():
        return None
    if abs(np.linalg.det(axes)) < 0.5:
        raise BadInput(
            f"both edges moved {'XY'[int(np.argmax(np.abs(axes[0])))]}: press the top edge and "
            "the right edge, each in its middle, once more"
        )
    return axes


def with_signs(
    calibration: Calibration, verdicts: Sequence[SignVerdict], *, done_utc: str
) -> Calibration:
    """``calibration`` with its axes as the tests have shown them.

    Signs are proven once both axes have been shown; how and when is kept in ``signs_shown``.
    Axes that run backwards or are exchanged are put right, and a warning says so. Raises BadInput
    where tests contradict each other.
    """
    if not verdicts:
        return calibration
    shown = tuple(_document(verdict, done_utc) for verdict in verdicts)
    others = tuple(w for w in calibration.warnings if not w.startswith(UNPROVEN))
    unclear = tuple(
        f"{v.how}: {v.text}" for v in verdicts if v.direction is Direction.UNCLEAR
    ) + tuple(
        f"{v.how}: {v.scale.text}" for v in verdicts if v.scale and v.scale.says.value != "agrees"
    )
    axes = axes_shown(verdicts)
    if axes is None:
        made = {v.made for v in verdicts if v.seen is not None}
        missing = [edge for axis, edge in ((0, "right"), (1, "top")) if axis not in made]
        told = f"{UNPROVEN}: still to be pressed, the {' and the '.join(missing)} edge"
        return replace(calibration, warnings=(told, *unclear, *others), signs_shown=shown)
    if not np.array_equal(axes, np.eye(2)):
        wrong = "; ".join(v.text for v in verdicts if v.direction is not Direction.RIGHT)
        others = (f"axes put right as the test has shown them: {wrong}", *others)
        calibration = with_axes(calibration, axes)
    return replace(calibration, signs="proven", warnings=(*unclear, *others), signs_shown=shown)


def _judge(how: str, made: int, change: Change) -> SignVerdict:
    size = [abs(value) for value in change.values]
    seen = int(size[1] > size[0])
    numbers = f"X {signed(change.x_arcsec, 1)}″, Y {signed(change.y_arcsec, 1)}″"
    if not size[seen] >= max(LEAST_ARCSEC, CLEAR_SD * change.sds[seen]):
        text = f"nothing clear moved ({numbers}): press harder, or take a thicker foil"
        return SignVerdict(how, made, None, 0, Direction.UNCLEAR, change, text)
    if size[seen] < CLEAR_OF_OTHER * size[1 - seen]:
        text = f"both axes moved alike ({numbers}): press the middle of the edge"
        return SignVerdict(how, made, None, 0, Direction.UNCLEAR, change, text)
    sign = 1 if change.values[seen] > 0 else -1
    name = "XY"[made]
    if seen != made:
        direction = Direction.SWAPPED
        text = f"{name} should have grown, {'XY'[seen]} moved instead ({numbers})"
    elif sign < 0:
        direction, text = Direction.MIRRORED, f"{name} should have grown, it fell ({numbers})"
    else:
        direction, text = Direction.RIGHT, f"{name} grew as it should ({numbers})"
    return SignVerdict(how, made, seen, sign, direction, change, text)


def _document(verdict: SignVerdict, done_utc: str) -> dict[str, Any]:
    change = verdict.change
    document: dict[str, Any] = {
        "how": verdict.how,
        "done_utc": done_utc,
        "direction": verdict.direction.value,
        "x_change_arcsec": change.x_arcsec,
        "y_change_arcsec": change.y_arcsec,
    }
    if verdict.scale is not None:
        document["ratio"] = verdict.scale.ratio
        document["ratio_u"] = verdict.scale.ratio_u
    return document
