"""Systematic error against the sub-pixel phase of the crossing."""

from __future__ import annotations

from concurrent.futures import Executor
from dataclasses import dataclass, replace

import numpy as np

from readout.model import F64
from readout.sighting import locate
from readout.simulation import Crosshair, Sensor, crosshair_image
from readout.simulation.ground import UniformGround, expose_on
from tests.bench.kinds import BITS8, REFERENCE, SHAPE, THIN, WIDE

PHASES = 32
QUIET = Sensor(bits=16, gain_levels_per_electron=0.0768, read_noise_electrons=6.0)
QUIET_LIGHT = 100.0
"""this many times the electrons: a tenth of the noise"""
SEED = 100

RETICLES: dict[str, Crosshair] = {
    "clean": REFERENCE,
    "turned 2°": replace(REFERENCE, rotation_deg=2.0),
    "turned 30°": replace(REFERENCE, rotation_deg=30.0),
    "thin": THIN,
    "wide": WIDE,
}


@dataclass(frozen=True)
class PhaseErrors:
    """Mean errors (phases, 2) and their standard errors, px; frames lost."""

    mean_px: F64
    se_px: F64
    lost: int


def errors_at(name: str, phase: float, frames: int, quiet: bool) -> F64:
    """Errors (frames, 2) at one phase of x and another of y."""
    crosshair, sensor = RETICLES[name], BITS8
    if quiet:
        crosshair = replace(
            crosshair,
            background=QUIET_LIGHT * crosshair.background,
            contrast=QUIET_LIGHT * crosshair.contrast,
        )
        sensor = QUIET
    x, y = SHAPE[1] / 2 + phase, SHAPE[0] / 2 + (phase + 0.5) % 1
    electrons = crosshair_image(SHAPE, x, y, crosshair)
    ground = UniformGround(crosshair.background, sensor)
    rng = np.random.default_rng((SEED, int(phase * PHASES)))
    errors = []
    for _ in range(frames):
        found = locate(expose_on(electrons, ground, rng), full_scale=sensor.full_scale)
        errors.append((found.x_px - x, found.y_px - y))
    return np.array(errors)


def phase_errors(pool: Executor, name: str, frames: int, *, quiet: bool) -> PhaseErrors:
    """Over 32 phases, ``frames`` at each."""
    jobs = [
        pool.submit(errors_at, name, phase, frames, quiet) for phase in np.arange(PHASES) / PHASES
    ]
    errors = np.array([job.result() for job in jobs])
    found = np.isfinite(errors).all(axis=2)
    n = np.maximum(found.sum(axis=1), 1)[:, None]
    kept = np.where(found[:, :, None], errors, 0.0)
    mean = kept.sum(axis=1) / n
    variance = (np.where(found[:, :, None], errors - mean[:, None], 0.0) ** 2).sum(axis=1) / n
    return PhaseErrors(mean, np.sqrt(variance / n), int((~found).sum()))
