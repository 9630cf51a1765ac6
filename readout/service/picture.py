"""The newest picture for people: 8 bits, the fitted arms drawn over it if asked."""

from __future__ import annotations

import math

import cv2
import numpy as np

from readout.files.pictures import encode_jpeg
from readout.instrument.observer import Picture
from readout.model import Pixels, Sighting

INK = 255, 200, 0  # blue, green, red: cyan, seen on black and on white
SHIFT = 4  # the drawing library takes positions in sixteenths of a pixel


def jpeg(picture: Picture, *, overlay: bool) -> bytes:
    """``picture`` as JPEG."""
    frame = picture.frame
    if not overlay:
        return encode_jpeg(frame.pixels, full_scale=frame.full_scale)
    grey: Pixels = frame.pixels
    if grey.dtype != np.uint8:
        grey = cv2.convertScaleAbs(grey, alpha=255.0 / frame.full_scale).astype(np.uint8)
    coloured = cv2.cvtColor(grey, cv2.COLOR_GRAY2BGR)
    _draw_arms(coloured, picture.sighting)
    return encode_jpeg(coloured.astype(np.uint8))


def _draw_arms(coloured: np.ndarray, sighting: Sighting) -> None:
    """Both centre lines through the crossing; angles are positive clockwise on screen."""
    if not sighting.found:
        return
    reach = float(sum(coloured.shape[:2]))
    for arm, nominal_deg in ((sighting.upright, 90.0), (sighting.level, 0.0)):
        if arm is None:
            continue
        turn = math.radians(nominal_deg + arm.angle_deg)
        along = np.array([math.cos(turn), math.sin(turn)]) * reach
        middle = np.array([sighting.x_px, sighting.y_px])
        ends = [np.round((middle + side * along) * 2**SHIFT).astype(int) for side in (-1, 1)]
        cv2.line(coloured, ends[0].tolist(), ends[1].tolist(), INK, 1, cv2.LINE_AA, SHIFT)
