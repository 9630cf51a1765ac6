"""Axes turned: to a machine's, by one move about a single axis, or as a nudge has shown them.

A machine that turns about one of its axes only moves the return along a line. If the instrument
stands turned about its own optical axis by rho, that line is turned by rho too; turning the
calibration back makes the move a move in one axis, and tilt times rho no longer leaks into the
other. A reflection or a turn acts on the slopes of the beam: A' = T A.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np

from readout.angle.calibration import Calibration, matrix_rows
from readout.angle.outliers import widening
from readout.errors import BadInput
from readout.model import F64

LARGEST_TURN_DEG = 45.0
CLEAR = 10.0
"""a move is this many times as long as its uncertainty, or it has no direction"""
LARGEST_TURN_SD_DEG = 5.0


@dataclass(frozen=True, slots=True)
class AxesTurn:
    """By how much the calibration's axes stand turned against the machine's.

    ``turn_deg``: from the machine's axes to those of the calibration, X towards Y positive.
    ``left_over_arcsec``: rms distance of the points from the line.
    """

    axis: str
    turn_deg: float
    turn_sd_deg: float
    left_over_arcsec: float
    n: int

    @property
    def leak_arcsec_per_100(self) -> float:
        """What a tilt of 100″ in one axis showed in the other before."""
        return 100.0 * math.sin(math.radians(self.turn_deg))


def turn_of_move(tilt_arcsec: F64, cov_arcsec2: F64, *, axis: str) -> AxesTurn:
    """The turn from a move about a single axis, in the order of growing tilt.

    ``tilt_arcsec`` (n, 2) and its noise (n, 2, 2); ``axis`` "x" or "y": the tilt that the machine
    changed. A straight line with uncertainties on both sides: the points are turned by the
    direction found so far until the line lies along the axis (York's line at a small slope, D.
    York, Can. J. Phys. 44 (1966) 1079). Where the points scatter more than their noise
    allows, the uncertainty is widened (``widening``).

    Raises BadInput if the move is too short, or lies nearer to the other axis or backwards.
    """
    if axis not in ("x", "y"):
        raise BadInput(f"axis is {axis or 'empty'}: say which tilt the machine changed, x or y")
    n = len(tilt_arcsec)
    if n < 2:
        raise BadInput("one point is no move: give at least two frames")
    along = np.array([1.0, 0.0]) if axis == "x" else np.array([0.0, 1.0])
    whole = tilt_arcsec[-1] - tilt_arcsec[0]
    noise = math.sqrt(float(np.trace(cov_arcsec2[0] + cov_arcsec2[-1])))
    if np.linalg.norm(whole) < CLEAR * noise or not np.any(whole):
        raise BadInput(
            f"the move is {np.linalg.norm(whole):.2g}″ long and known to {noise:.2g}″: move farther"
        )
    turn = _angle(whole) - _angle(along)
    for _ in range(5):
        back = _rotation(-turn)
        moved = tilt_arcsec @ back.T
        cov = back @ cov_arcsec2 @ back.T
        lengthwise, aside = (0, 1) if axis == "x" else (1, 0)
        weight = 1 / np.maximum(cov[:, aside, aside], 1e-12)
        t = moved[:, lengthwise] - np.average(moved[:, lengthwise], weights=weight)
        off = moved[:, aside] - np.average(moved[:, aside], weights=weight)
        slope = float(np.sum(weight * t * off) / np.sum(weight * t**2))
        turn += math.atan(slope) * (1 if axis == "x" else -1)
    sd = float(np.sum(weight * t**2)) ** -0.5
    chi_square = float(np.sum(weight * (off - slope * t) ** 2))
    sd *= widening(chi_square, n - 2)
    turn_deg = math.degrees(math.remainder(turn, 2 * math.pi))
    _check(turn_deg, math.degrees(sd), axis)
    rms = math.sqrt(float(np.mean((off - slope * t) ** 2)))
    return AxesTurn(axis, turn_deg, math.degrees(sd), rms, n)


def turned_to(calibration: Calibration, turn: AxesTurn) -> Calibration:
    """``calibration`` with the machine's axes; the turn's uncertainty is in its covariance."""
    rad = math.radians(turn.turn_deg)
    made = with_axes(calibration, _rotation(-rad))
    quarter = np.array([[0.0, 1.0], [-1.0, 0.0]])
    by_turn = np.zeros(7)
    by_turn[:4] = (quarter @ np.array(made.matrix)).ravel()
    cov = np.array(made.param_cov)
    cov += math.radians(turn.turn_sd_deg) ** 2 * np.outer(by_turn, by_turn)
    return replace(
        made,
        param_cov=tuple(tuple(row) for row in cov.tolist()),
        made_from={
            **made.made_from,
            "axes": {
                "single_axis_move": turn.axis,
                "turned_deg": turn.turn_deg,
                "turned_sd_deg": turn.turn_sd_deg,
                "left_over_arcsec": turn.left_over_arcsec,
                "frames": turn.n,
            },
        },
    )


def with_axes(calibration: Calibration, axes: F64) -> Calibration:
    """``calibration`` with the slopes turned or mirrored by ``axes``, an orthogonal (2, 2)."""
    whole = np.eye(7)
    whole[:4, :4] = np.kron(axes, np.eye(2))  # of A by rows
    cov = whole @ np.array(calibration.param_cov) @ whole.T
    return replace(
        calibration,
        matrix=matrix_rows(axes @ np.array(calibration.matrix)),
        param_cov=tuple(tuple(row) for row in ((cov + cov.T) / 2).tolist()),
    )


def _check(turn_deg: float, sd_deg: float, axis: str) -> None:
    if abs(turn_deg) > LARGEST_TURN_DEG:
        raise BadInput(
            f"the move about {axis} goes {turn_deg:+.0f}° off its axis: give the frames in the "
            "order of growing tilt, name the other axis, or prove the signs first"
        )
    if sd_deg > LARGEST_TURN_SD_DEG:
        raise BadInput(
            f"the direction of the move is known to {sd_deg:.1f}° only: move farther, or about "
            "one axis alone"
        )


def _angle(vector: F64) -> float:
    return math.atan2(float(vector[1]), float(vector[0]))


def _rotation(rad: float) -> F64:
    c, s = math.cos(rad), math.sin(rad)
    return np.array([[c, -s], [s, c]])
