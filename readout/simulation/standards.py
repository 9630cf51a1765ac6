"""What people calibrate with, simulated: levers, certified wedges, wedges in the beam, windows.

Each gives the true tilts (or the true returns) for what a person would set and read, with errors
drawn from the uncertainties that the person would state: those of the standard once, those of a
setting each time.
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace

import numpy as np

from readout.angle.optics import tilt_of_slopes
from readout.model import F64, Pixels
from readout.simulation.autocollimator import Autocollimator
from readout.simulation.crosshair import crosshair_image
from readout.simulation.sensor import expose
from readout.simulation.wedge import GlassWedge
from readout.units import ARCSEC_PER_RAD

REAR_SHARE = 0.92
"""light of a window's rear return against the front one's: it passes the front face twice, which
lets through 96 % each time (Fresnel, glass of 1.5)"""

Tilt = tuple[float, float]


@dataclass(frozen=True, slots=True)
class Lever:
    """A bar on two supports. ``sd_mm`` of its length, ``block_sd_mm`` of each block, both drawn
    once; ``seating_sd_mm`` of a height, drawn anew each time.
    """

    length_mm: float = 200.0
    sd_mm: float = 0.2
    block_sd_mm: float = 2e-4
    seating_sd_mm: float = 1e-4

    def tilts(
        self, heights_mm: Sequence[float], axes: Sequence[int], rest: Tilt, rng: np.random.Generator
    ) -> F64:
        """True tilts (n, 2) for nominal heights, negative ones under the other end."""
        length_mm = self.length_mm + rng.normal(0, self.sd_mm)
        sizes = sorted({abs(height) for height in heights_mm if height})
        real = {size: size + rng.normal(0, self.block_sd_mm) for size in sizes}
        tilts = np.tile(np.array(rest, dtype=np.float64), (len(heights_mm), 1))
        for row, (height, axis) in enumerate(zip(heights_mm, axes, strict=True)):
            raised = math.copysign(real[abs(height)], height) if height else 0.0
            raised += rng.normal(0, self.seating_sd_mm)
            tilts[row, axis] += math.asin(raised / length_mm) * ARCSEC_PER_RAD
        return tilts


def tilts_through_wedge(wedge: GlassWedge, turns_deg: Sequence[float | None], mirror: Tilt) -> F64:
    """Tilts (n, 2) that an instrument reads through a wedge at these turns; None: no wedge."""
    rows = []
    for turn in turns_deg:
        seen = mirror if turn is None else tilt_of_slopes(*wedge.through(turn, mirror))
        rows.append([float(value) for value in seen])
    return np.array(rows)


def tilts_of_window(window: GlassWedge, turns_deg: Sequence[float]) -> F64:
    """Tilts (n, 2, 2) that the front and the rear return read, front first."""
    return np.array(
        [
            [[float(v) for v in tilt_of_slopes(*slopes)] for slopes in window.returns(turn)]
            for turn in turns_deg
        ]
    )


def frames_of_returns(
    autocollimator: Autocollimator, returns_arcsec: F64, *, seed: int
) -> Iterator[tuple[Pixels, F64]]:
    """A picture and the places (k, 2), px, of its k returns for each row of (n, k, 2) tilts.

    The first is as bright as the reticle says, each further one ``REAR_SHARE`` of the one before;
    lights add.
    """
    calibration = autocollimator.calibration()
    reticle = autocollimator.picture_of_reticle
    for k, returns in enumerate(returns_arcsec, start=1):
        places = np.stack(calibration.position(returns[:, 0], returns[:, 1]), axis=1)
        electrons = np.zeros(autocollimator.shape)
        for number, (x_px, y_px) in enumerate(places):
            share = REAR_SHARE**number
            light = replace(
                reticle,
                background=reticle.background if number == 0 else 0.0,
                contrast=reticle.contrast * share,
            )
            electrons += crosshair_image(autocollimator.shape, float(x_px), float(y_px), light)
        yield expose(electrons, autocollimator.sensor, np.random.default_rng((seed, k))), places
