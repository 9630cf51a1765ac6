"""Frames with known truth, one after another, by the exact path."""

from __future__ import annotations

from dataclasses import dataclass

from readout.angle import Calibration
from readout.simulation.motion import Motion


@dataclass(frozen=True, slots=True)
class Truth:
    """What a simulated frame shows: the mirror's tilt and the crossing in the picture."""

    t_s: float
    x_px: float
    y_px: float
    x_arcsec: float
    y_arcsec: float


def truth_at(t_s: float, motion: Motion, calibration: Calibration) -> Truth:
    """Tilt and place of the return at a time since the start."""
    x_arcsec, y_arcsec = motion.tilt(t_s)
    x_px, y_px = calibration.position(x_arcsec, y_arcsec)
    return Truth(t_s, float(x_px), float(y_px), float(x_arcsec), float(y_arcsec))
