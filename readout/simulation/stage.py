"""A mirror on a tilting stage, stepped through a grid of known tilts: frames to calibrate from."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, field

import numpy as np

from readout.angle import Mounting
from readout.model import F64, Pixels
from readout.simulation.autocollimator import Autocollimator
from readout.simulation.sensor import expose


def bench_autocollimator() -> Autocollimator:
    """An objective a little shorter than engraved, the camera turned and behind a splitter."""
    return Autocollimator(
        focal_length_mm=290.37,
        pitch_um=3.45,
        rotation_deg=1.7,
        mounting=Mounting.SWAPPED_SIDES,
    )


@dataclass(frozen=True, slots=True)
class SteppedStage:
    """A grid of tilts ``x_steps`` by ``y_steps`` about the stage's zero.

    ``sd_arcsec``: standard deviation of the true tilt about what the stage shows, independent
    from step to step. ``zero_arcsec``: tilt from the optical axis where the stage shows zero.
    """

    seed: int
    autocollimator: Autocollimator = field(default_factory=bench_autocollimator)
    reach_arcsec: tuple[float, float] = (300.0, 200.0)
    x_steps: int = 5
    y_steps: int = 3
    sd_arcsec: float = 0.02
    zero_arcsec: tuple[float, float] = (14.2, -8.6)

    def shown_arcsec(self) -> F64:
        """What the stage shows at each step, (n, 2)."""
        x = np.linspace(-self.reach_arcsec[0], self.reach_arcsec[0], self.x_steps)
        y = np.linspace(-self.reach_arcsec[1], self.reach_arcsec[1], self.y_steps)
        return np.stack([grid.ravel() for grid in np.meshgrid(x, y)], axis=1)

    def true_arcsec(self) -> F64:
        """The mirror's tilt from the optical axis at each step, (n, 2)."""
        shown = self.shown_arcsec()
        rng = np.random.default_rng((self.seed, 0))
        return np.asarray(shown + self.zero_arcsec + rng.normal(0, self.sd_arcsec, shown.shape))

    def frames(self) -> Iterator[tuple[Pixels, F64]]:
        """Each step's picture and where in it the return lies (x, y), px."""
        yield from frames_at(self.autocollimator, self.true_arcsec(), seed=self.seed)


def frames_at(
    autocollimator: Autocollimator, tilts_arcsec: F64, *, seed: int
) -> Iterator[tuple[Pixels, F64]]:
    """A picture and the place of the return (x, y), px, for each tilt of (n, 2)."""
    calibration = autocollimator.calibration()
    for k, tilt in enumerate(tilts_arcsec, start=1):
        x_px, y_px = calibration.position(*tilt)
        electrons = autocollimator.electrons(float(x_px), float(y_px))
        rng = np.random.default_rng((seed, k))
        yield expose(electrons, autocollimator.sensor, rng), np.array([x_px, y_px])
