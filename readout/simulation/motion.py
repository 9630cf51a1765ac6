"""A mirror on a bench: it drifts slowly, shakes a little and is bumped now and then.

The tilt is a pure function of the seed and the time: there is no state to carry along, a moment
can be asked for in any order, days after the start as well as at once.

Drift and shake are sums of tones with random phases, their frequencies spread evenly in the
logarithm (the spectral representation of noise, S. O. Rice, Bell System Technical Journal 23
(1944) 282); drift amplitudes grow with the root of the period, as in a random walk. Time is cut
into cells with one bump in each, whose moment, size and ring come from a hash of the cell's
number. After a bump the mirror rings down as a damped oscillator and comes to rest a little
beside where it stood.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from enum import IntEnum, auto
from functools import lru_cache
from typing import Final

import numpy as np
from numpy.typing import NDArray

from readout.model import F64

U64 = NDArray[np.uint64]
I64 = NDArray[np.int64]

DRIFT_TONES: Final = 8
SHAKE_TONES: Final = 12


@dataclass(frozen=True, slots=True)
class Motion:
    """How a mirror moves; the tilt of ``rest_arcsec`` is what all motion goes around.

    ``drift_arcsec`` and ``shake_arcsec``: rms of an axis. ``bump_arcsec``: size of a usual bump,
    one in every ``bump_every_s`` seconds. ``bump_shift_arcsec``: largest displacement from rest
    a bump leaves behind; the displacements never sum up.
    """

    seed: int = 0
    rest_arcsec: tuple[float, float] = (24.0, -13.0)
    drift_arcsec: float = 5.0
    drift_periods_s: tuple[float, float] = (150.0, 6 * 3600.0)
    shake_arcsec: float = 0.12
    shake_hz: tuple[float, float] = (0.4, 11.0)
    bump_arcsec: float = 4.0
    bump_shift_arcsec: float = 0.6
    bump_every_s: float = 30.0

    def tilt(self, t_s: F64 | float) -> tuple[F64, F64]:
        """Mirror tilt (x, y) in arc-seconds at ``t_s`` seconds, any shape, any finite time."""
        times = np.asarray(t_s, dtype=np.float64)
        t = times.ravel()
        both_axes = (
            np.array(self.rest_arcsec)[:, None]
            + _drift(self).sum_at(t)
            + _shake(self).sum_at(t)
            + _bumped(self, t)
        )
        return both_axes[0].reshape(times.shape), both_axes[1].reshape(times.shape)


class _Draw(IntEnum):
    """What a hashed number decides: each use has a sequence of its own."""

    DRIFT_FREQUENCY_X = auto()
    DRIFT_FREQUENCY_Y = auto()
    DRIFT_PHASE_X = auto()
    DRIFT_PHASE_Y = auto()
    SHAKE_FREQUENCY_X = auto()
    SHAKE_FREQUENCY_Y = auto()
    SHAKE_PHASE_X = auto()
    SHAKE_PHASE_Y = auto()
    BUMP_MOMENT = auto()
    BUMP_SIZE = auto()
    BUMP_DIRECTION = auto()
    RING_FREQUENCY_X = auto()
    RING_FREQUENCY_Y = auto()
    RING_TIME_X = auto()
    RING_TIME_Y = auto()
    REST_X = auto()
    REST_Y = auto()


_REST = (_Draw.REST_X, _Draw.REST_Y)
_BUMP = (
    _Draw.BUMP_SIZE,
    _Draw.BUMP_DIRECTION,
    _Draw.RING_FREQUENCY_X,
    _Draw.RING_FREQUENCY_Y,
    _Draw.RING_TIME_X,
    _Draw.RING_TIME_Y,
)


def _mixed(z: U64) -> U64:
    """The output function of SplitMix64 (G. L. Steele, D. Lea, C. H. Flood, OOPSLA 2014)."""
    z = (z ^ (z >> np.uint64(30))) * np.uint64(0xBF58476D1CE4E5B9)
    z = (z ^ (z >> np.uint64(27))) * np.uint64(0x94D049BB133111EB)
    return z ^ (z >> np.uint64(31))


def _uniform(seed: int, draws: Sequence[_Draw], index: I64) -> F64:
    """Numbers in [0, 1), shape (draws, index), the same for ever for a seed."""
    golden = np.uint64(0x9E3779B97F4A7C15)
    start = _mixed(np.array([[seed % 2**64]], dtype=np.uint64))
    start = _mixed(start + golden * np.array(draws, dtype=np.uint64)[:, None])
    bits = _mixed(start + golden * index.astype(np.uint64))
    return np.asarray((bits >> np.uint64(11)).astype(np.float64) * 2.0**-53)


@dataclass(frozen=True, slots=True)
class _Tones:
    """Sines of both axes, arrays (n, 2, 1)."""

    amplitude_arcsec: F64
    angular_hz: F64
    phase_rad: F64

    def sum_at(self, t_s: F64) -> F64:
        """Their sum, shape (2, times); one tone after another, to hold little memory."""
        total = np.zeros((2, t_s.size))
        for amplitude, angular, phase in zip(
            self.amplitude_arcsec, self.angular_hz, self.phase_rad, strict=True
        ):
            total += amplitude * np.sin(angular * t_s + phase)
        return total


def _tones(
    seed: int,
    n: int,
    band_hz: tuple[float, float],
    power_of_frequency: float,
    rms_arcsec: float,
    draws: Sequence[_Draw],
) -> _Tones:
    """``n`` tones an axis, one in each of n equal parts of the logarithm of the band.

    ``draws``: frequency of x and y, phase of x and y.
    """
    low, high = math.log(band_hz[0]), math.log(band_hz[1])
    random = _uniform(seed, draws, np.arange(n)).T[:, :, None]
    part = (np.arange(n)[:, None, None] + random[:, :2]) / n
    frequency = np.exp(low + (high - low) * part)
    amplitude = frequency**power_of_frequency
    rms = np.sqrt((amplitude**2).sum(axis=0) / 2)
    turn = 2 * math.pi
    return _Tones(rms_arcsec * amplitude / rms, turn * frequency, turn * random[:, 2:])


@lru_cache(maxsize=16)
def _drift(motion: Motion) -> _Tones:
    short, long = motion.drift_periods_s
    draws = tuple(_Draw)[0:4]
    return _tones(motion.seed, DRIFT_TONES, (1 / long, 1 / short), -0.5, motion.drift_arcsec, draws)


@lru_cache(maxsize=16)
def _shake(motion: Motion) -> _Tones:
    draws = tuple(_Draw)[4:8]
    return _tones(motion.seed, SHAKE_TONES, motion.shake_hz, 0.0, motion.shake_arcsec, draws)


def _bumped(motion: Motion, t_s: F64) -> F64:
    """Displacement by bumps, shape (2, times): this cell's and the one's before still count.

    Before the bump of cell k the mirror rests at s(k-1), after it at s(k). What a bump two cells
    back left has died away by exp(-20) at least: no ring lasts longer than a twentieth of a cell.
    """
    cell = np.floor(t_s / motion.bump_every_s).astype(np.int64)
    rest_0, rest_1, rest_2 = (_rest(motion, cell - back) for back in (2, 1, 0))
    before = rest_1 + _ring(motion, cell - 1, t_s, rest_1 - rest_0)
    after = rest_2 - rest_1 + _ring(motion, cell, t_s, rest_2 - rest_1)
    return np.where(t_s >= _moment_s(motion, cell), before + after, before)


def _moment_s(motion: Motion, cell: I64) -> F64:
    return motion.bump_every_s * (cell + _uniform(motion.seed, (_Draw.BUMP_MOMENT,), cell)[0])


def _rest(motion: Motion, cell: I64) -> F64:
    return motion.bump_shift_arcsec * (2 * _uniform(motion.seed, _REST, cell) - 1)


def _ring(motion: Motion, cell: I64, t_s: F64, step_arcsec: F64) -> F64:
    """What dies away after the bump of a cell, shape (2, times); minus the step at its moment."""
    random = _uniform(motion.seed, _BUMP, cell)
    size = motion.bump_arcsec * (0.4 + 1.2 * random[0])
    direction = 2 * math.pi * random[1]
    push = size * np.stack([np.cos(direction), np.sin(direction)])
    angular_hz = 2 * math.pi * (1.5 + 2.5 * random[2:4])
    ring_time_s = motion.bump_every_s / 20 * (0.3 + 0.7 * random[4:6])
    age_s = np.maximum(t_s - _moment_s(motion, cell), 0.0)
    angle = angular_hz * age_s
    decay = np.exp(-age_s / ring_time_s)
    return np.asarray(decay * (push * np.sin(angle) - step_arcsec * np.cos(angle)))
