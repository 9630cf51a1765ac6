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
from dataclasses import dataclass
from enum import IntEnum, auto
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from readout.model import F64

U64 = NDArray[np.uint64]


@dataclass(frozen=True, slots=True)
class Motion:
    """How a mirror moves; the tilt of ``rest_arcsec`` is what all motion goes around.

    ``drift_arcsec`` and ``shake_arcsec``: rms of an axis. ``bump_arcsec``: size of a usual bump,
    one in every ``bump_every_s`` seconds. ``bump_shift_arcsec``: largest displacement a bump
    leaves behind, never summing up.
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
        drift, shake = _drift(self), _shake(self)
        x, y = (
            self.rest_arcsec[axis]
            + drift.sum_at(axis, t)
            + shake.sum_at(axis, t)
            + _bumped(self, axis, t)
            for axis in (0, 1)
        )
        return x.reshape(times.shape), y.reshape(times.shape)


class _Stream(IntEnum):
    """What a hashed number is used for: each use has a sequence of its own."""

    DRIFT_PERIOD = auto()
    DRIFT_PHASE = auto()
    SHAKE_FREQUENCY = auto()
    SHAKE_PHASE = auto()
    BUMP_MOMENT = auto()
    BUMP_SIZE = auto()
    BUMP_DIRECTION = auto()
    BUMP_SHIFT = auto()
    RING_FREQUENCY = auto()
    RING_TIME = auto()


def _mixed(z: U64) -> U64:
    """The output function of SplitMix64 (G. L. Steele, D. Lea, C. H. Flood, OOPSLA 2014)."""
    z = (z ^ (z >> np.uint64(30))) * np.uint64(0xBF58476D1CE4E5B9)
    z = (z ^ (z >> np.uint64(27))) * np.uint64(0x94D049BB133111EB)
    return z ^ (z >> np.uint64(31))


def _uniform(seed: int, stream: _Stream, axis: int, index: NDArray[np.int64]) -> F64:
    """A number in [0, 1) for each whole ``index`` (1-D), the same for ever for a seed."""
    golden = np.uint64(0x9E3779B97F4A7C15)
    key = np.array([seed % 2**64, 2 * stream + axis], dtype=np.uint64)
    start = _mixed(_mixed(key[:1]) + golden * key[1:])
    bits = _mixed(start + golden * index.astype(np.uint64))
    return np.asarray((bits >> np.uint64(11)).astype(np.float64) * 2.0**-53)


@dataclass(frozen=True, slots=True)
class _Tones:
    """Sines of each axis, arrays (2, n)."""

    amplitude_arcsec: F64
    frequency_hz: F64
    phase_rad: F64

    def sum_at(self, axis: int, t_s: F64) -> F64:
        total = np.zeros(t_s.shape)
        for amplitude, frequency, phase in zip(
            self.amplitude_arcsec[axis],
            self.frequency_hz[axis],
            self.phase_rad[axis],
            strict=True,
        ):
            total = total + amplitude * np.sin(2 * math.pi * frequency * t_s + phase)
        return total


def _tones(
    seed: int,
    n: int,
    band_hz: tuple[float, float],
    power_of_frequency: float,
    rms_arcsec: float,
    frequency_stream: _Stream,
    phase_stream: _Stream,
) -> _Tones:
    """``n`` tones an axis, one in each of n equal parts of the logarithm of the band."""
    index = np.arange(n)
    low, high = math.log(band_hz[0]), math.log(band_hz[1])
    frequency, phase = (
        np.stack([_uniform(seed, stream, axis, index) for axis in (0, 1)])
        for stream in (frequency_stream, phase_stream)
    )
    frequency = np.exp(low + (high - low) * (index + frequency) / n)
    amplitude = frequency**power_of_frequency
    rms = np.sqrt((amplitude**2).sum(axis=1, keepdims=True) / 2)
    return _Tones(rms_arcsec * amplitude / rms, frequency, 2 * math.pi * phase)


@lru_cache(maxsize=16)
def _drift(motion: Motion) -> _Tones:
    short, long = motion.drift_periods_s
    return _tones(
        motion.seed,
        8,
        (1 / long, 1 / short),
        -0.5,
        motion.drift_arcsec,
        _Stream.DRIFT_PERIOD,
        _Stream.DRIFT_PHASE,
    )


@lru_cache(maxsize=16)
def _shake(motion: Motion) -> _Tones:
    return _tones(
        motion.seed,
        12,
        motion.shake_hz,
        0.0,
        motion.shake_arcsec,
        _Stream.SHAKE_FREQUENCY,
        _Stream.SHAKE_PHASE,
    )


def _bumped(motion: Motion, axis: int, t_s: F64) -> F64:
    """Displacement by bumps: those of this cell of time and of the one before still count.

    Before the bump k the mirror rests at s(k-1), after it at s(k). The ring of a bump two cells
    back has died away by exp(-20) at least, for no ring lasts longer than a twentieth of a cell.
    """
    cell = np.floor(t_s / motion.bump_every_s).astype(np.int64)
    settled = _rest_after(motion, axis, cell - 1)
    total = settled + _ring(motion, axis, cell - 1, t_s)
    after = _rest_after(motion, axis, cell) - settled + _ring(motion, axis, cell, t_s)
    return np.where(t_s >= _moment_s(motion, cell), total + after, total)


def _moment_s(motion: Motion, cell: NDArray[np.int64]) -> F64:
    start = cell + _uniform(motion.seed, _Stream.BUMP_MOMENT, 0, cell)
    return np.asarray(motion.bump_every_s * start)


def _rest_after(motion: Motion, axis: int, cell: NDArray[np.int64]) -> F64:
    share = 2 * _uniform(motion.seed, _Stream.BUMP_SHIFT, axis, cell) - 1
    return np.asarray(motion.bump_shift_arcsec * share)


def _ring(motion: Motion, axis: int, cell: NDArray[np.int64], t_s: F64) -> F64:
    """The part of the bump that dies away; at its moment just minus the step of the rest."""
    seed = motion.seed
    age_s = np.maximum(t_s - _moment_s(motion, cell), 0.0)
    size = motion.bump_arcsec * (0.4 + 1.2 * _uniform(seed, _Stream.BUMP_SIZE, 0, cell))
    direction = 2 * math.pi * _uniform(seed, _Stream.BUMP_DIRECTION, 0, cell)
    push = size * (np.cos(direction) if axis == 0 else np.sin(direction))
    ring_hz = 1.5 + 2.5 * _uniform(seed, _Stream.RING_FREQUENCY, axis, cell)
    longest_s = motion.bump_every_s / 20
    ring_time_s = longest_s * (0.3 + 0.7 * _uniform(seed, _Stream.RING_TIME, axis, cell))
    step = _rest_after(motion, axis, cell) - _rest_after(motion, axis, cell - 1)
    angle = 2 * math.pi * ring_hz * age_s
    return np.asarray(
        np.exp(-age_s / ring_time_s) * (push * np.sin(angle) - step * np.cos(angle))
    )
