"""What more or less light does to the place of a lopsided line, response curve undone or not."""

from __future__ import annotations

from concurrent.futures import Executor
from dataclasses import dataclass

import numpy as np

from readout.model import F64, Pixels, Quality
from readout.sighting import locate
from readout.sighting.prepare import Preparation
from readout.sighting.response import power_response
from readout.sighting.targets import AS_THEY_COME
from readout.simulation import Crosshair, Sensor, crosshair_image, expose
from readout.simulation.blemishes import second_return
from readout.simulation.response import display_encoded
from tests.bench.kinds import REFERENCE, SHAPE

SEED = 300
LIGHTS = (0.7, 1.0, 1.3)
GAMMA = 0.45
LOBE, LOBE_PX = 0.1, 6.0
LINEAR8 = Sensor(8, gain_levels_per_electron=0.025, read_noise_electrons=6.0, black_levels=4.0)
LINEAR12 = Sensor(12, gain_levels_per_electron=0.4, read_noise_electrons=6.0, black_levels=0.0)
"""with room for 30 % more light; a display-encoding camera takes its black level off first"""
CORRECTED = Preparation(response=power_response(GAMMA, 255))
CAMERAS = ("linear", "gamma 0.45", "gamma 0.45, corrected")
LINES: dict[str, tuple[Crosshair, float]] = {
    "even line": (REFERENCE, 0.0),
    "side lobe 10 %": (REFERENCE, LOBE),
}


@dataclass(frozen=True)
class Shifts:
    """Mean shift (2, 2) from even light, for less and more light, x and y; its standard error;

    frames of the changed light that came with a word or without a place.
    """

    shift_px: F64
    se_px: F64
    flagged: int
    lost: int


def taken(electrons: F64, camera: str, rng: np.random.Generator) -> tuple[Pixels, Preparation]:
    """A frame of one of ``CAMERAS``, 8 bit, and what is known of the camera."""
    if camera == "linear":
        return expose(electrons, LINEAR8, rng), AS_THEY_COME
    shown = display_encoded(expose(electrons, LINEAR12, rng), LINEAR12.full_scale, gamma=GAMMA)
    return shown, AS_THEY_COME if camera == "gamma 0.45" else CORRECTED


def shifts(line: str, camera: str, frames: int) -> Shifts:
    """The same places under each light."""
    crosshair, lobe = LINES[line]
    errors, words = np.empty((len(LIGHTS), frames, 2)), np.zeros((len(LIGHTS), frames), bool)
    for k in range(frames):
        rng = np.random.default_rng((SEED, k))
        x, y = np.array([SHAPE[1], SHAPE[0]]) / 2 + rng.uniform(-8, 8, 2)
        electrons = crosshair_image(SHAPE, x, y, crosshair)
        if lobe:
            electrons += second_return(
                SHAPE, x, y, crosshair, strength=lobe, offset_px=(LOBE_PX, LOBE_PX)
            )
        for n, light in enumerate(LIGHTS):
            pixels, known = taken(light * electrons, camera, rng)
            found = locate(pixels, full_scale=255, preparation=known)
            errors[n, k] = found.x_px - x, found.y_px - y
            words[n, k] = found.found and found.quality is not Quality.OK
    changed = errors[[0, 2]] - errors[1]
    kept = np.isfinite(changed).all(axis=(0, 2))
    return Shifts(
        changed[:, kept].mean(axis=1),
        changed[:, kept].std(axis=1) / np.sqrt(max(int(kept.sum()), 1)),
        int(words[[0, 2]].sum()),
        int((~kept).sum()),
    )


def all_shifts(pool: Executor, frames: int) -> list[tuple[str, str, Shifts]]:
    """Each line with each camera."""
    jobs = [
        (line, camera, pool.submit(shifts, line, camera, frames))
        for line in LINES
        for camera in CAMERAS
    ]
    return [(line, camera, job.result()) for line, camera, job in jobs]
