"""What a push at the mirror says of the signs, and a calibration with its axes put right.

Pressed at its top edge towards the instrument, the mirror must show growing Y; pressed at its
right edge, growing X. What is seen instead names the mirror image: an axis that runs backwards, or
two that are exchanged (a camera on its side).
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from enum import StrEnum

import numpy as np

from readout.angle import Calibration
from readout.angle.calibration import matrix_rows
from readout.errors import BadInput
from readout.units import signed

LEAST_ARCSEC = 1.0
"""smaller than this is no push: a bench does that by itself"""
CLEAR = 2.0
"""a push along an edge's own axis is this many times what it does to the other axis"""


class Outcome(StrEnum):
    """What the pushes show together."""

    UNPROVEN = "unproven"
    """not enough has been seen"""
    PROVEN = "proven"
    MIRRORED = "mirrored"
    """one axis runs backwards, or both"""
    SWAPPED = "swapped"
    """X and Y are exchanged"""


@dataclass(frozen=True, slots=True)
class Push:
    """By how much a push changed the reading, as the calibration in use shows it."""

    x_arcsec: float
    y_arcsec: float

    @property
    def along(self) -> tuple[int, int]:
        """Axis (0 for X, 1 for Y) and sign of the change.

        Raises BadInput for one that is too small or lies between the axes.
        """
        change = (self.x_arcsec, self.y_arcsec)
        axis = int(abs(change[1]) > abs(change[0]))
        if abs(change[axis]) < LEAST_ARCSEC:
            raise BadInput(
                f"nothing moved by more than {LEAST_ARCSEC:g}″: press a little harder, and keep "
                "pressing until it is seen"
            )
        if abs(change[axis]) < CLEAR * abs(change[1 - axis]):
            raise BadInput(
                f"X moved by {signed(change[0], 1)}″ and Y by {signed(change[1], 1)}″, too alike "
                "to tell one from the other: press the middle of the edge"
            )
        return axis, 1 if change[axis] > 0 else -1


@dataclass(frozen=True, slots=True)
class Verdict:
    """``text``: what was seen and what to do. ``turn``: rows of what makes true slopes of those
    shown; None while unproven.
    """

    outcome: Outcome
    text: str
    turn: tuple[tuple[int, int], tuple[int, int]] | None = None


def judge(top: Push | None, right: Push | None) -> Verdict:
    """What both pushes say; each is clear by itself (see ``Push.along``) or None."""
    if top is None or right is None:
        missing = " and ".join(
            edge for edge, push in (("top", top), ("right", right)) if push is None
        )
        return Verdict(Outcome.UNPROVEN, f"still to be pressed: the {missing} edge")
    (top_axis, top_sign), (right_axis, right_sign) = top.along, right.along
    if top_axis == right_axis:
        return Verdict(
            Outcome.UNPROVEN,
            f"both edges moved {'XY'[top_axis]}: press the top edge and the right edge, each in "
            "its middle, once more",
        )
    rows = [[0, 0], [0, 0]]
    rows[0][right_axis], rows[1][top_axis] = right_sign, top_sign
    turn = ((rows[0][0], rows[0][1]), (rows[1][0], rows[1][1]))
    if right_axis == 1:
        return Verdict(
            Outcome.SWAPPED,
            "X and Y are exchanged: the camera stands on its side, or the axes of the calibration "
            "were mistaken for each other. Turn the camera by a quarter, or take the axes as the "
            "pushes showed them",
            turn,
        )
    backwards = [axis for axis, sign in (("X", right_sign), ("Y", top_sign)) if sign < 0]
    if backwards:
        runs = "X and Y run" if len(backwards) == 2 else f"{backwards[0]} runs"
        return Verdict(
            Outcome.MIRRORED,
            f"{runs} backwards: the picture is a mirror image of what was taken for granted. "
            "Choose another mounting, or take the axes as the pushes showed them",
            turn,
        )
    return Verdict(Outcome.PROVEN, "both edges move the right axis the right way", turn)


def with_proven_signs(
    calibration: Calibration, turn: tuple[tuple[int, int], tuple[int, int]]
) -> Calibration:
    """``calibration`` with its axes turned as a verdict says, its signs proven.

    A' = T A for the signed exchange T; the covariance of the matrix turns with it.
    """
    t = np.array(turn, dtype=np.float64)
    whole = np.eye(7)
    whole[:4, :4] = np.kron(t, np.eye(2))  # A by rows: a' = (T x 1) a
    cov = whole @ np.array(calibration.param_cov) @ whole.T
    return replace(
        calibration,
        matrix=matrix_rows(t @ np.array(calibration.matrix)),
        param_cov=tuple(tuple(row) for row in cov.tolist()),
        signs="proven",
        warnings=tuple(w for w in calibration.warnings if not w.startswith("signs unproven")),
    )


@dataclass(frozen=True, slots=True)
class Foil:
    """A foil of ``thickness_mm`` under one of two feet ``base_mm`` apart, with uncertainties."""

    thickness_mm: float
    base_mm: float
    thickness_sd_mm: float
    base_sd_mm: float

    def __post_init__(self) -> None:
        if not 0 < self.thickness_mm < self.base_mm:
            raise BadInput(
                f"a foil of {self.thickness_mm:g} mm under a base of {self.base_mm:g} mm cannot "
                "be: check which is which"
            )

    @property
    def tilt_arcsec(self) -> float:
        """asin(thickness / base), as a bar on two feet."""
        return math.asin(self.thickness_mm / self.base_mm) * 180 * 3600 / math.pi

    @property
    def tilt_sd_arcsec(self) -> float:
        rel = math.hypot(self.thickness_sd_mm / self.thickness_mm, self.base_sd_mm / self.base_mm)
        return rel * self.tilt_arcsec


def judge_foil(foil: Foil, seen: Push, u_arcsec: float) -> tuple[bool, str]:
    """Is the scale right, and what a change ``seen`` with standard uncertainty ``u_arcsec`` says.

    The ratio counts against twice the combined uncertainty; a factor of two has a cause of its own.
    """
    axis, _ = seen.along
    size = abs((seen.x_arcsec, seen.y_arcsec)[axis])
    ratio = size / foil.tilt_arcsec
    u_ratio = ratio * math.hypot(foil.tilt_sd_arcsec / foil.tilt_arcsec, u_arcsec / size)
    said = (
        f"{size:.1f}″ seen, {foil.tilt_arcsec:.1f}″ expected: {ratio:.3f} times, "
        f"± {u_ratio:.3f} (one standard uncertainty)"
    )
    if abs(ratio - 1) <= 2 * u_ratio:
        return True, f"{said}. The scale is right within what the foil can tell"
    for factor, cause in (
        (2.0, "the beam's angle was taken for the mirror's, or the focal length is half as long"),
        (0.5, "the mirror's angle was taken for the beam's, or the focal length is twice as long"),
    ):
        if abs(ratio / factor - 1) <= 2 * u_ratio / factor:
            return False, f"{said}. A factor of {factor:g}: {cause}"
    return False, f"{said}. Foil, base or scale is wrong: measure them, then calibrate anew"
