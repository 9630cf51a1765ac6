"""From the place of the return image to the tilt of the mirror, and what that is worth."""

from readout.angle.calibration import Calibration
from readout.angle.known_tilts import calibrate_known_tilts
from readout.angle.nominal import Mounting, nominal_calibration
from readout.angle.reading import reading_of
from readout.angle.tilt_set import Camera, SharedInput, TiltSet

__all__ = [
    "Calibration",
    "Camera",
    "Mounting",
    "SharedInput",
    "TiltSet",
    "calibrate_known_tilts",
    "nominal_calibration",
    "reading_of",
]
