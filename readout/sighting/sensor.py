"""Gain and read noise of the sensor by photon transfer, from pairs of frames of one scene.

Photons arrive by chance, n of them with variance n. A linear sensor of gain K levels per electron
and read noise r levels therefore shows the straight line

    variance = r^2 + 1/12 + K (level - black)

(European Machine Vision Association, Standard 1288, release 4.0 Linear, 2021; J. R. Janesick,
Photon Transfer, SPIE 2007). 1/12 is what rounding to whole levels adds.

*Rounding.* It adds exactly 1/12 only where noise spreads over the steps (B. Widrow and I. Kollar,
Quantization Noise, 2008; W. F. Sheppard, Proc. London Math. Soc. 29 (1898) 353). Noise of s levels
leaves a ripple of amplitude (4 s^2 + 1/pi^2) exp(-2 pi^2 s^2) that depends on where between two
steps the level lies: 0.4 % of s^2 at s = 0.6, 3 % at half a step, 20 % at 0.4, and below 0.2 the
ripple is all there is; a quiet flat ground shows no noise whatever. EMVA 1288 takes no variance
in the dark below 0.24 level^2 for a measurement (value from memory). Here the ripple enters as an
uncertainty of each level's variance, so that quiet levels lose their weight and the claimed
uncertainty of the read noise grows to as much as 0.3 levels; ``Doubt.ROUNDED`` says so. The gain
comes from the levels that have noise enough.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from enum import Flag, auto
from typing import Final, Self

import numpy as np
from scipy.stats import sigmaclip

from readout.model import F64, QUANTISATION_VAR, Pixels
from readout.sighting.frame_pair import Tally, no_tally, tally_pair
from readout.sighting.transfer_line import TransferLine, fit_transfer_line

LEAST_NOISE_LEVELS: Final = 0.5
"""less noise than this where it is darkest is said to be rounded away"""
LEAST_GAIN_SD: Final = 4.0
"""a gain fewer of its sd above 0 is not known"""
LARGEST_FLICKER: Final = 0.005
LEAST_FLICKER_SD: Final = 5.0
LARGEST_SHARE: Final = 0.01
"""of pixels that changed, or are saturated, which goes without saying"""


class Doubt(Flag):
    """What about a photon transfer deserves less trust; each with what to do about it.

    NO_GAIN: the light seen does not fix the gain: show more contrast, or take more pairs.
    ROUNDED: noise under half a step where it is darkest, or in the dark: the read noise is within
    its uncertainty of 0, no better known; use more bits or more gain. CURVED: the variances follow
    no line: a response curve, compression or denoising in the camera; compare only with itself.
    CHANGED: the scene moved between the frames, those pixels are left out. FLICKERED: the light
    changed, which is taken out. SATURATED: levels at the top of the scale, left out.
    """

    NONE = 0
    NO_GAIN = auto()
    ROUNDED = auto()
    CURVED = auto()
    CHANGED = auto()
    FLICKERED = auto()
    SATURATED = auto()


@dataclass(frozen=True, slots=True)
class PhotonTransfer:
    """The noise of a sensor: a line of variance over level, with what is known of it.

    ``variance_levels2`` is the line's value at ``middle_level``, ``gain_levels_per_electron`` its
    slope; ``cov`` (vv, vg, gg) their covariance. ``black_levels``: mean level in the dark, NaN
    without dark frames. ``least_level`` to ``most_level``: where it was seen. ``pixels`` used,
    counted once a pair. ``changed_share``: part of the pixels left out because the scene changed.
    ``brightness_change``: how much more light the first frame of a pair had, as a part. NaN where
    nothing could be measured.
    """

    middle_level: float
    variance_levels2: float
    gain_levels_per_electron: float
    cov: tuple[float, float, float]
    black_levels: float
    least_level: float
    most_level: float
    pixels: int
    changed_share: float
    brightness_change: float
    doubt: Doubt

    @property
    def gain_sd(self) -> float:
        """Standard uncertainty of the gain, levels per electron."""
        return math.sqrt(self.cov[2])

    def variance_at(self, level: F64 | float) -> F64:
        """Variance of a pixel of this level, rounding included, levels^2, any shape.

        Never below that of rounding. Where the gain is not known the variance of the levels seen
        stands for all; outside the levels seen the line is continued. NaN if nothing was measured.
        """
        slope = 0.0 if Doubt.NO_GAIN in self.doubt else self.gain_levels_per_electron
        line = self.variance_levels2 + slope * (np.asarray(level) - self.middle_level)
        return np.asarray(np.maximum(line, QUANTISATION_VAR))

    def variance_sd_at(self, level: F64 | float) -> F64:
        """Standard uncertainty of the line's value there, any shape."""
        away = np.asarray(level) - self.middle_level
        vv, vg, gg = self.cov
        return np.asarray(np.sqrt(vv + 2 * away * vg + away**2 * gg))

    @property
    def read_noise_levels(self) -> float:
        """Noise in the dark without that of rounding, levels; NaN without dark frames."""
        return math.sqrt(max(self._read_variance, 0.0))

    @property
    def read_noise_levels_sd(self) -> float:
        """Its standard uncertainty; for a read noise of 0 the largest that is compatible."""
        sd = float(self.variance_sd_at(self.black_levels))
        least = max(self._read_variance, 0.0)
        return math.sqrt(least + sd) - math.sqrt(least)

    @property
    def read_noise_electrons(self) -> float:
        """Noise in the dark, electrons; NaN without dark frames or without a gain."""
        if Doubt.NO_GAIN in self.doubt:
            return math.nan
        return self.read_noise_levels / self.gain_levels_per_electron

    @property
    def read_noise_electrons_sd(self) -> float:
        """Its standard uncertainty."""
        if Doubt.NO_GAIN in self.doubt:
            return math.nan
        gain, noise = self.gain_levels_per_electron, self.read_noise_levels
        _, vg, gg = self.cov
        noise_var = self.read_noise_levels_sd**2
        together = (vg + (self.black_levels - self.middle_level) * gg) / (2 * max(noise, 1e-9))
        bound = math.sqrt(noise_var * gg)
        together = min(max(together, -bound), bound)
        return math.sqrt(
            max(noise_var - 2 * noise / gain * together + (noise / gain) ** 2 * gg, 0.0)
        ) / abs(gain)

    @property
    def _read_variance(self) -> float:
        away = self.black_levels - self.middle_level
        return self.variance_levels2 + self.gain_levels_per_electron * away - QUANTISATION_VAR


def photon_transfer(
    first: Pixels,
    second: Pixels,
    *,
    full_scale: int,
    dark: tuple[Pixels, Pixels] | None = None,
) -> PhotonTransfer:
    """Gain and, with a dark pair, read noise from one pair of frames of the same scene.

    Parameters
    ----------
    first, second : array (height, width), uint8 or uint16
        Two frames of one scene with light and dark in it, as they left the sensor, the second
        soon after the first; the reticle's image will do.
    full_scale : int
        Largest value the sensor can give; such pixels and their neighbours are left out.
    dark : pair of arrays, optional
        Two frames with the lamp off, of any shape.

    Returns
    -------
    PhotonTransfer
        With standard uncertainties by the jackknife over groups of tiles (J. W. Tukey, Ann. Math.
        Stat. 29 (1958) 614), which also hold for noise that goes from pixel to pixel, to which
        the uncertainty by rounding is added. Never raises on a bad picture: see ``Doubt``.

    Raises
    ------
    ValueError
        If the two frames of a pair differ in shape or are smaller than 8 x 8.
    """
    light = tally_pair(first, second, full_scale)
    if np.array_equal(first, second):  # one frame given twice
        light = no_tally()
    in_dark = None if dark is None else tally_pair(*dark, full_scale)
    black = math.nan if dark is None else _black(*dark)
    return transfer_of(light, full_scale=full_scale, dark=in_dark, black_levels=black)


def _black(first: Pixels, second: Pixels) -> float:
    """Mean level of a dark pair without the hot pixels."""
    return float(sigmaclip((first.astype(np.float64) + second) / 2).clipped.mean())


@dataclass(frozen=True, slots=True)
class RunningTransfer:
    """Photon transfer from frames as they come: each two make a pair, the last pairs count.

    No frame is used in two pairs, so that pairs are independent. A frame that repeats the one
    before it is passed over; one of another shape begins anew. To watch the gain, compare
    ``transfer`` with that of a time when the exposure was known to be locked: ``gain_change``.
    """

    full_scale: int
    most_pairs: int = 1
    tallies: tuple[Tally, ...] = ()
    waiting: Pixels | None = None

    def after(self, frame: Pixels) -> Self:
        """The same with one more frame."""
        first = self.waiting
        if first is None or first.shape != frame.shape:
            kept = self.tallies if first is None else ()
            return replace(self, tallies=kept, waiting=frame)
        if np.array_equal(first, frame):
            return self
        tallies = (*self.tallies, tally_pair(first, frame, self.full_scale))
        return replace(self, tallies=tallies[-self.most_pairs :], waiting=None)

    @property
    def transfer(self) -> PhotonTransfer:
        """What the last pairs say together."""
        return transfer_of(sum(self.tallies, no_tally()), full_scale=self.full_scale)


def gain_change(now: PhotonTransfer, then: PhotonTransfer) -> tuple[float, float]:
    """Ratio of the gain now to the gain then, and its standard uncertainty; NaN if not known.

    Exposure halved and gain doubled leave the brightness alone, but not this ratio.
    """
    if Doubt.NO_GAIN in now.doubt | then.doubt:
        return math.nan, math.nan
    ratio = now.gain_levels_per_electron / then.gain_levels_per_electron
    parts = (t.gain_sd / t.gain_levels_per_electron for t in (now, then))
    return ratio, ratio * math.hypot(*parts)


def transfer_of(
    light: Tally, *, full_scale: int, dark: Tally | None = None, black_levels: float = math.nan
) -> PhotonTransfer:
    """The law that the tally of one or more pairs, and of dark pairs if there are any, shows."""
    both = light if dark is None else light + dark
    doubt = Doubt.NONE
    if light.changed_px > LARGEST_SHARE * light.seen_px:
        doubt |= Doubt.CHANGED
    if light.saturated_px > LARGEST_SHARE * (light.seen_px + light.saturated_px):
        doubt |= Doubt.SATURATED
    brightness_change = light.brightness_change / light.pairs if light.pairs else math.nan
    its_sd = math.sqrt(light.brightness_change_var) / max(light.pairs, 1)
    if abs(brightness_change) > max(LARGEST_FLICKER, LEAST_FLICKER_SD * its_sd):
        doubt |= Doubt.FLICKERED
    law = PhotonTransfer(
        middle_level=math.nan,
        variance_levels2=math.nan,
        gain_levels_per_electron=math.nan,
        cov=(math.nan, math.nan, math.nan),
        black_levels=black_levels,
        least_level=math.nan,
        most_level=math.nan,
        pixels=int(both.count.sum()),
        changed_share=light.changed_px / light.seen_px if light.seen_px else math.nan,
        brightness_change=brightness_change,
        doubt=doubt | Doubt.NO_GAIN,
    )
    line = fit_transfer_line(both, full_scale)
    return law if line is None else _with_line(law, line, doubt)


def _with_line(law: PhotonTransfer, line: TransferLine, doubt: Doubt) -> PhotonTransfer:
    """The law with the line put in, and what the line gives reason to doubt."""
    cov = line.cov
    if line.curved:
        doubt |= Doubt.CURVED
    if not line.gain > LEAST_GAIN_SD * math.sqrt(cov[1, 1]):
        doubt |= Doubt.NO_GAIN
    law = replace(
        law,
        middle_level=line.middle_level,
        variance_levels2=line.variance_levels2,
        gain_levels_per_electron=line.gain,
        cov=(float(cov[0, 0]), float(cov[0, 1]), float(cov[1, 1])),
        least_level=line.least_level,
        most_level=line.most_level,
        doubt=doubt,
    )
    darkest = law.least_level if math.isnan(law.black_levels) else law.black_levels
    if law.variance_at(darkest) < LEAST_NOISE_LEVELS**2 + QUANTISATION_VAR:
        law = replace(law, doubt=law.doubt | Doubt.ROUNDED)
    return law
