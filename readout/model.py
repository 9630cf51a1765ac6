"""Frozen values that cross the borders between packages.

A frame becomes an observation (where the return image lies, in pixels), an observation becomes a
reading (how the mirror is tilted, in arc-seconds). Each value keeps the sequence number and the
time of the frame it came from. What could not be measured is NaN with a quality word, never a
missing row and never the previous value.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from enum import Flag, StrEnum, auto

import numpy as np
from numpy.typing import NDArray

F64 = NDArray[np.float64]
Pixels = NDArray[np.uint8] | NDArray[np.uint16]

QUANTISATION_VAR = 1 / 12
"""Variance of rounding to whole levels, in levels^2 (B. Widrow, IRE Trans. CT-3 (1956) 266)."""


class Quality(Flag):
    """Why a frame, a sighting or a reading deserves less trust; no flag means none known.

    The words are stable: they stand in logs, streams and exported tables.
    """

    OK = 0
    NO_IMAGE = auto()
    DIM = auto()
    SATURATED = auto()
    BLURRED = auto()
    ASTIGMATIC = auto()
    VIGNETTED = auto()
    AT_EDGE = auto()
    ONE_AXIS = auto()
    SEVERAL_RETURNS = auto()
    DAMAGED = auto()
    DUPLICATE = auto()
    SETTLING = auto()
    UNLOCKED = auto()

    def words(self) -> list[str]:
        """The flags set, as lower-case words in the order of the table above."""
        return [flag.name.lower() for flag in Quality if flag in self and flag.name]

    @classmethod
    def from_words(cls, words: list[str]) -> Quality:
        """Turn words back into flags. Raises KeyError for a word that is none of the table's."""
        quality = cls.OK
        for word in words:
            quality |= cls[word.upper()]
        return quality


class Target(StrEnum):
    """What the instrument images on the sensor."""

    CROSSHAIR = "crosshair"
    SPOT = "spot"


@dataclass(frozen=True, slots=True)
class Frame:
    """One picture as it left a source.

    ``pixels`` is (height, width), uint8 or uint16, luminance, never resized or turned;
    ``full_scale`` the largest value the sensor can give (255 for 8 bit, 1023 for 10 bit in 16).
    ``t_mono_ns`` is the monotonic clock right after the grab, ``t_utc_ns`` the same instant as UTC
    since 1970. ``name`` is the file a frame was read from. ``quality`` holds what the source
    knows (damaged, duplicate), before anything was measured.
    """

    pixels: Pixels
    seq: int
    t_mono_ns: int
    t_utc_ns: int
    full_scale: int
    name: str | None = None
    quality: Quality = Quality.OK


@dataclass(frozen=True, slots=True)
class Arm:
    """One fitted arm of the crosshair.

    ``angle_deg``: turn of the arm from its nominal direction (upright arm: picture vertical,
    level arm: picture +x), positive clockwise on screen. ``width_px``: full width at half
    maximum across the arm. ``contrast``: peak minus background, in levels, negative for a dark
    arm on a bright ground. ``background`` in levels. ``line_px``, ``blur_px``: width of the line
    before the blur, and the blur's standard deviation; of a thin line only both together are known.
    """

    angle_deg: float
    width_px: float
    contrast: float
    background: float
    line_px: float = math.nan
    blur_px: float = math.nan


@dataclass(frozen=True, slots=True)
class Return:
    """Another return in the same frame, or a line that could be part of one.

    ``cov_px2`` as in ``Sighting``. ``share``: its contrast relative to the main return's, of the
    brighter of its arms. ``lone``: only one arm of it was seen beside the main return's, so that
    the other one, if there is one, hides in the main return's own.
    """

    x_px: float
    y_px: float
    cov_px2: tuple[float, float, float]
    share: float
    lone: bool = False


@dataclass(frozen=True, slots=True)
class Sighting:
    """Where the return image lies in one frame.

    ``x_px, y_px``: intersection of the centre lines of the two arms; pixel centres are integers,
    origin at the centre of the top-left pixel, x right, y down. ``cov_px2``: (xx, xy, yy), the
    covariance claimed from noise alone. ``peak``: brightest level used. NaN where nothing could
    be measured; ``quality`` then says why. ``others``: further returns, brightest first.
    ``tracked``: frames since the whole picture was searched for them.
    """

    x_px: float
    y_px: float
    cov_px2: tuple[float, float, float]
    quality: Quality
    upright: Arm | None = None
    level: Arm | None = None
    peak: float = math.nan
    others: tuple[Return, ...] = ()
    tracked: int = 0

    @property
    def found(self) -> bool:
        return math.isfinite(self.x_px) and math.isfinite(self.y_px)

    @property
    def x_sd_px(self) -> float:
        return math.sqrt(self.cov_px2[0])

    @property
    def y_sd_px(self) -> float:
        return math.sqrt(self.cov_px2[2])

    @property
    def xy_correlation(self) -> float:
        xx, xy, yy = self.cov_px2
        return xy / math.sqrt(xx * yy) if xx > 0 and yy > 0 else math.nan


def no_sighting(quality: Quality) -> Sighting:
    """A sighting that says only why there is none."""
    return Sighting(math.nan, math.nan, (math.nan, math.nan, math.nan), quality)


@dataclass(frozen=True, slots=True)
class Observation:
    """A sighting with the stamp of its frame, without the pixels: what crosses a pipe.

    ``prepared``: when that was made which the frame was prepared with (UTC), None for a frame as it
    came.
    """

    seq: int
    t_mono_ns: int
    t_utc_ns: int
    width_px: int
    height_px: int
    sighting: Sighting
    name: str | None = None
    prepared: str | None = None


@dataclass(frozen=True, slots=True)
class Reading:
    """The tilt of the mirror at one instant.

    Absolute tilt from the optical axis, in arc-seconds: x > 0 when the mirror's right edge is
    nearer to the instrument, y > 0 when its top edge is nearer. ``*_sd_arcsec`` is the standard
    uncertainty from noise alone, independent from row to row; ``*_u_arcsec`` the combined one,
    largely common to all rows. ``t_s``: seconds since the program, folder or video began.
    Without a calibration the angles are NaN while the positions stand. ``signs``: of the
    calibration, "proven" or "unproven", None without one.
    """

    seq: int
    t_s: float
    t_utc_ns: int
    x_arcsec: float
    y_arcsec: float
    x_sd_arcsec: float
    y_sd_arcsec: float
    x_u_arcsec: float
    y_u_arcsec: float
    x_px: float
    y_px: float
    x_sd_px: float
    y_sd_px: float
    quality: Quality
    calibration_id: str | None = None
    name: str | None = None
    signs: str | None = None

    @property
    def good(self) -> bool:
        """True for an angle nobody has a doubt about."""
        return self.quality is Quality.OK and math.isfinite(self.x_arcsec)
