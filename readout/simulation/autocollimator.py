"""A whole simulated autocollimator: mirror tilt in, expected electrons on the sensor out."""

from __future__ import annotations

from dataclasses import dataclass, field, replace

from readout.angle import Calibration, Mounting, nominal_calibration
from readout.model import F64
from readout.simulation.crosshair import Crosshair, crosshair_image
from readout.simulation.sensor import Sensor

NO_DATE_UTC = "2000-01-01T00:00:00.000Z"
"""A simulated instrument is made at no particular time: the same files for the same seed."""


@dataclass(frozen=True, slots=True)
class Autocollimator:
    """Objective, camera and reticle.

    ``rotation_deg``: turn of the camera about the optical axis, as in ``nominal_calibration``.
    ``reticle``: levels in electrons; its own turn adds to that of the camera in the picture.
    """

    focal_length_mm: float = 300.0
    pitch_um: float = 3.45
    width_px: int = 640
    height_px: int = 480
    rotation_deg: float = 0.4
    mounting: Mounting = Mounting.STRAIGHT
    reticle: Crosshair = field(default_factory=Crosshair)
    sensor: Sensor = field(default_factory=Sensor)

    @property
    def shape(self) -> tuple[int, int]:
        """(height, width) of the picture."""
        return self.height_px, self.width_px

    @property
    def picture_of_reticle(self) -> Crosshair:
        """The crosshair as it stands in the picture."""
        turn = self.reticle.rotation_deg + self.rotation_deg
        return replace(self.reticle, rotation_deg=turn)

    def calibration(self, created_utc: str = NO_DATE_UTC) -> Calibration:
        """The instrument's true calibration: without uncertainty, its signs known."""
        nominal = nominal_calibration(
            focal_length_mm=self.focal_length_mm,
            pitch_um=self.pitch_um,
            image_width_px=self.width_px,
            image_height_px=self.height_px,
            mounting=self.mounting,
            rotation_deg=self.rotation_deg,
            focal_length_rel_sd=0.0,
            rotation_sd_deg=0.0,
            created_utc=created_utc,
        )
        return replace(
            nominal,
            id=nominal.id.replace("nominal", "simulated"),
            method="simulated",
            signs="proven",
            warnings=(),
        )

    def electrons(self, x_px: float, y_px: float) -> F64:
        """Expected electrons of every pixel with the crossing at a place, shape (height, width)."""
        return crosshair_image(self.shape, x_px, y_px, self.picture_of_reticle)
