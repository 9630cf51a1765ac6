"""Frames of graduated scales with known truth, a crosshair return lying across the marks."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from readout.angle.calibration import Calibration
from readout.angle.nominal import Mounting, nominal_calibration
from readout.model import F64, Pixels
from readout.sighting.graduation import Scale
from readout.simulation.crosshair import Crosshair, crosshair_image
from readout.simulation.graduation import Ruling, ruled_share
from readout.simulation.sensor import Sensor, expose

SENSOR = Sensor(bits=8, gain_levels_per_electron=0.02, read_noise_electrons=8.0)
SHAPE = (240, 320)
GROUND, LIT_GROUND, RETURN = 6000.0, 800.0, 4000.0


@dataclass(frozen=True)
class Scene:
    """A frame's expected electrons, the true calibration and the ruling in it."""

    electrons: F64
    truth: Calibration
    ruling: Ruling

    def frame(self, seed: int) -> Pixels:
        """One noisy picture."""
        return expose(self.electrons, SENSOR, np.random.default_rng(seed))

    def clean(self) -> F64:
        """Levels without noise and rounding."""
        return SENSOR.mean_levels(self.electrons)

    def mark_errors_px(self, scale: Scale) -> tuple[F64, bool]:
        """How far along the scale each mark is off its true place, px, and whether the numbers
        count the true marks.
        """
        axis = int(scale.upright)
        at = self.truth.slopes(*scale.place_px.T)[axis] / self.ruling.division_slope
        at -= self.ruling.phase_div
        number = np.rint(at)
        step = np.diff(number) * np.sign(number[-1] - number[0])
        counted = bool(np.array_equal(step, np.diff(scale.numbers)))
        px = self.ruling.division_slope * self.truth.focal_length_px
        return (at - number) * px * np.sign(number[-1] - number[0]), counted


def scene(
    *,
    shape: tuple[int, int] = SHAPE,
    rotation_deg: float = 0.0,
    step_px: float = 20.0,
    mounting: Mounting = Mounting.STRAIGHT,
    k1: float = 0.0,
    lit: bool = False,
    depth: float = 0.8,
    both: bool = False,
    crosshair_px: tuple[float, float] | None = (147.3, 130.6),
    crosshair_deg: float = 2.0,
    **ruling: float | bool | tuple[int, ...],
) -> Scene:
    """A scale (two with ``both``) seen by a camera turned by ``rotation_deg``."""
    truth = nominal_calibration(
        focal_length_mm=300.0,
        pitch_um=3.45,
        image_width_px=shape[1],
        image_height_px=shape[0],
        mounting=mounting,
        rotation_deg=rotation_deg,
    )
    truth = replace(truth, k1=k1)
    ruled = Ruling(step_px / truth.focal_length_px, **ruling)  # type: ignore[arg-type]  # by name
    share = ruled_share(shape, truth, ruled)
    if both:
        share = 1 - (1 - share) * (1 - ruled_share(shape, truth, ruled, upright=True))
    ground = LIT_GROUND if lit else GROUND
    electrons = np.full(shape, ground)
    if crosshair_px is not None:
        across = Crosshair(
            line_px=5.0,
            blur_px=1.2,
            rotation_deg=crosshair_deg,
            background=ground,
            contrast=RETURN,
        )
        electrons = crosshair_image(shape, *crosshair_px, across)
    electrons = electrons + depth * RETURN * share if lit else electrons * (1 - depth * share)
    return Scene(electrons, truth, ruled)
