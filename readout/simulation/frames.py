"""Frames with known truth, one after another, by the exact path."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace

import numpy as np

from readout.angle import Calibration, Mounting
from readout.errors import BadInput
from readout.model import Pixels
from readout.simulation.autocollimator import NO_DATE_UTC, Autocollimator
from readout.simulation.bar import LEAST_BLUR_PX
from readout.simulation.crosshair import Crosshair
from readout.simulation.motion import Motion
from readout.simulation.sensor import Sensor, expose


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


@dataclass(frozen=True, slots=True)
class SimulatedFrames:
    """Frames to iterate over, each a (pixels, truth); twice over gives the same frames twice.

    Frame k shows the mirror at k / ``frames_per_s`` seconds; its noise depends on seed and k
    alone.
    """

    autocollimator: Autocollimator
    motion: Motion
    n: int
    frames_per_s: float
    seed: int
    noise: bool = True
    created_utc: str = NO_DATE_UTC

    @property
    def calibration(self) -> Calibration:
        """The true calibration of the instrument."""
        return self.autocollimator.calibration(self.created_utc)

    @property
    def full_scale(self) -> int:
        """The largest level of the sensor."""
        return self.autocollimator.sensor.full_scale

    def __len__(self) -> int:
        return self.n

    def __iter__(self) -> Iterator[tuple[Pixels, Truth]]:
        calibration, sensor = self.calibration, self.autocollimator.sensor
        for k in range(self.n):
            truth = truth_at(k / self.frames_per_s, self.motion, calibration)
            electrons = self.autocollimator.electrons(truth.x_px, truth.y_px)
            if self.noise:
                rng = np.random.default_rng((self.seed % 2**64, k))
                yield expose(electrons, sensor, rng), truth
            else:
                yield sensor.quantise(sensor.mean_levels(electrons)), truth


def simulate_frames(
    *,
    frames: int = 100,
    seed: int = 0,
    frames_per_s: float = 30.0,
    width_px: int = 640,
    height_px: int = 480,
    bits: int = 8,
    line_px: float = 5.0,
    blur_px: float = 1.2,
    rotation_deg: float = 0.4,
    mounting: Mounting = Mounting.STRAIGHT,
    dark: bool = False,
    background: float = 0.08,
    contrast: float = 0.7,
    noise: bool = True,
    full_scale_electrons: float = 10_000.0,
    read_noise_electrons: float = 6.0,
    focal_length_mm: float = 300.0,
    pitch_um: float = 3.45,
    still: bool = False,
    x_arcsec: float = 24.0,
    y_arcsec: float = -13.0,
    created_utc: str = NO_DATE_UTC,
) -> SimulatedFrames:
    """Frames of a simulated autocollimator from options a person gives.

    Parameters
    ----------
    frames, frames_per_s, width_px, height_px
        How many pictures, how fast they follow each other, and their size.
    seed
        The same seed gives the same frames, another one another motion and other noise.
    bits
        8 to 16.
    line_px, blur_px
        Width of a line before blurring and standard deviation of the blur, in pixels; blur 0.3
        at least.
    rotation_deg, mounting
        Turn of the camera, clockwise in the picture, and how the picture stands.
    dark
        Dark lines on bright ground instead of bright ones on dark ground.
    background, contrast
        Level of the darker of the two and what the brighter one has more, as parts of the full
        scale. Together above 1 they saturate.
    noise, full_scale_electrons, read_noise_electrons
        Photon noise goes with the electrons that fill the scale, read noise is a standard
        deviation; ``noise=False`` leaves the rounding to whole levels alone.
    focal_length_mm, pitch_um
        Of the objective and of a pixel: the scale is pitch / (2 focal length) a pixel.
    still, x_arcsec, y_arcsec
        The tilt all motion goes around; ``still`` keeps the mirror there.
    created_utc
        Date in the calibration; without one the files are the same whenever they are made.

    Raises
    ------
    BadInput
        One line that names the option and what it may be.
    """
    _check("frames", frames, 1, 10_000_000)
    _check("frames-per-s", frames_per_s, 1e-6, 1e6)
    _check("width-px", width_px, 16, 16384)
    _check("height-px", height_px, 16, 16384)
    _check("bits", bits, 8, 16)
    _check("line-px", line_px, 0.1, 200)
    _check("blur-px", blur_px, LEAST_BLUR_PX, 100)
    _check("rotation-deg", rotation_deg, -45, 45)
    _check("background", background, 0, 1)
    _check("contrast", contrast, 0.0001, 10)
    _check("full-scale-electrons", full_scale_electrons, 100, 1e9)
    _check("read-noise-electrons", read_noise_electrons, 0, 1e6)
    _check("focal-length-mm", focal_length_mm, 1, 100_000)
    _check("pitch-um", pitch_um, 0.1, 1000)
    for name, tilt in (("x-arcsec", x_arcsec), ("y-arcsec", y_arcsec)):
        _check(name, tilt, -36_000, 36_000)
    black = 4.0 * 2 ** (bits - 8)
    sensor = Sensor(
        bits=bits,
        gain_levels_per_electron=(2**bits - 1 - black) / full_scale_electrons,
        read_noise_electrons=read_noise_electrons,
        black_levels=black,
    )
    ground, step = (background + contrast, -contrast) if dark else (background, contrast)
    reticle = Crosshair(
        line_px=line_px,
        blur_px=blur_px,
        background=ground * full_scale_electrons,
        contrast=step * full_scale_electrons,
    )
    rest = (x_arcsec, y_arcsec)
    motion = Motion(seed=seed, rest_arcsec=rest)
    if still:
        motion = replace(
            motion, drift_arcsec=0.0, shake_arcsec=0.0, bump_arcsec=0.0, bump_shift_arcsec=0.0
        )
    return SimulatedFrames(
        autocollimator=Autocollimator(
            focal_length_mm=focal_length_mm,
            pitch_um=pitch_um,
            width_px=width_px,
            height_px=height_px,
            rotation_deg=rotation_deg,
            mounting=mounting,
            reticle=reticle,
            sensor=sensor,
        ),
        motion=motion,
        n=frames,
        frames_per_s=frames_per_s,
        seed=seed,
        noise=noise,
        created_utc=created_utc,
    )


def _check(option: str, value: float, least: float, most: float) -> None:
    if not least <= value <= most:
        raise BadInput(f"--{option} {value:g} cannot be: give {least:g} to {most:g}")
