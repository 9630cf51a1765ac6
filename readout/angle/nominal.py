"""A calibration from what is engraved on the parts: focal length, pixel pitch and mounting."""

from __future__ import annotations

import hashlib
import math
from enum import StrEnum

import numpy as np

from readout.angle.calibration import Calibration, matrix_rows
from readout.errors import BadInput
from readout.model import F64, Target


class Mounting(StrEnum):
    """How the picture stands against the one a bare upright sensor in a straight path shows."""

    STRAIGHT = "straight"
    """as the bare sensor shows it"""
    SWAPPED_SIDES = "swapped_sides"
    """left and right exchanged, as by one reflection in a beam splitter beside the axis"""
    UPSIDE_DOWN = "upside_down"
    """top and bottom exchanged, as by one reflection above or below the axis"""
    HALF_TURN = "half_turn"
    """both exchanged, as through an eyepiece"""


_EXCHANGES = {
    Mounting.STRAIGHT: (1, 1),
    Mounting.SWAPPED_SIDES: (-1, 1),
    Mounting.UPSIDE_DOWN: (1, -1),
    Mounting.HALF_TURN: (-1, -1),
}


def mounting_matrix(mounting: Mounting, rotation_deg: float = 0.0) -> F64:
    """Matrix from the picture's axes (x right, y down) to those of the focal plane, shape (2, 2).

    A bare upright sensor shows the focal plane turned by half a turn about the vertical: its
    picture's x is -u, its y is v. ``rotation_deg``: turn of the camera, so that growing X tilt
    moves the return from picture +x clockwise by this angle (mounting straight).
    """
    turn = math.radians(rotation_deg)
    c, s = math.cos(turn), math.sin(turn)
    bare = np.diag([-1.0, 1.0])
    exchanged = np.diag([float(e) for e in _EXCHANGES[mounting]])
    return bare @ exchanged @ np.array([[c, s], [-s, c]])


def nominal_calibration(
    *,
    focal_length_mm: float,
    pitch_um: float,
    image_width_px: int,
    image_height_px: int,
    mounting: Mounting = Mounting.STRAIGHT,
    rotation_deg: float = 0.0,
    focal_length_rel_sd: float = 0.01,
    rotation_sd_deg: float = 1.0,
    target: Target = Target.CROSSHAIR,
    created_utc: str = "",
) -> Calibration:
    """Calibration from data of the parts, with p0 at the picture's centre and signs unproven.

    The focal length engraved on an objective is commonly held to about one per cent and a camera
    is set upright by eye to about a degree (common practice, no standard): the default
    uncertainties. Raises BadInput unless focal length and pitch are positive.
    """
    if not (focal_length_mm > 0 and pitch_um > 0 and math.isfinite(focal_length_mm * pitch_um)):
        raise BadInput(
            f"a focal length of {focal_length_mm:g} mm with a pixel pitch of {pitch_um:g} µm "
            "cannot be: give both as positive numbers"
        )
    matrix = pitch_um * 1e-3 / focal_length_mm * mounting_matrix(mounting, rotation_deg)
    scale_direction = matrix.ravel()
    turn_direction = (matrix @ np.array([[0.0, 1.0], [-1.0, 0.0]])).ravel()
    cov = np.zeros((7, 7))
    cov[:4, :4] = focal_length_rel_sd**2 * np.outer(scale_direction, scale_direction)
    cov[:4, :4] += math.radians(rotation_sd_deg) ** 2 * np.outer(turn_direction, turn_direction)
    made_from = {
        "focal_length_mm": focal_length_mm,
        "focal_length_rel_sd": focal_length_rel_sd,
        "pitch_um": pitch_um,
        "mounting": mounting.value,
        "rotation_deg": rotation_deg,
        "rotation_sd_deg": rotation_sd_deg,
    }
    fingerprint = hashlib.sha256(
        repr((sorted(made_from.items()), image_width_px, image_height_px, target)).encode()
    )
    return Calibration(
        id=f"nominal-{fingerprint.hexdigest()[:10]}",
        created_utc=created_utc,
        method="nominal",
        matrix=matrix_rows(matrix),
        p0_px=((image_width_px - 1) / 2, (image_height_px - 1) / 2),
        image_width_px=image_width_px,
        image_height_px=image_height_px,
        param_cov=tuple(tuple(row) for row in cov.tolist()),
        target=target,
        pitch_um=pitch_um,
        warnings=("signs unproven: nudge the mirror and compare", "focal length not measured"),
        made_from=made_from,
    )
