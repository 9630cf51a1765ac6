"""Where the return lies while the mirror is at rest: what a guided procedure takes as a point.

Positions are taken in pixels, so that it works before there is any scale.
"""

from __future__ import annotations

import math
import threading
from collections import deque
from dataclasses import dataclass

import numpy as np

from readout.errors import NotNow
from readout.instrument.averaging import HISTORY_S, standard_error
from readout.instrument.instrument import Instrument
from readout.instrument.stillness import STILL_WITHIN_ARCSEC, SWAY_ARCSEC, moves
from readout.model import F64, Quality, Reading

FEWEST = 3
ARCSEC_PER_PX = 1.0
"""Where no scale is known: about that of a usual camera behind an objective of 300 mm."""


@dataclass(frozen=True, slots=True)
class Steady:
    """The mean position over a window of ``n`` good readings, with its covariance (xx, xy, yy).

    The standard errors allow for readings that hang together; the two axes are taken as
    independent, as they are for two like arms at right angles, however turned.
    """

    x_px: float
    y_px: float
    cov_px2: tuple[float, float, float]
    n: int
    window_s: float
    t_s: float


class Steadiness:
    """Follows the readings of ``instrument`` and gives the steady position when asked."""

    def __init__(self, instrument: Instrument) -> None:
        self._instrument = instrument
        self._lock = threading.Lock()
        self._held: deque[Reading] = deque()
        instrument.on_reading.append(self._take)
        instrument.on_state.append(lambda *_: self._forget())

    def now(self, then: str) -> Steady:
        """The position now. ``then``: what was asked for, for the message.

        Raises NotNow while the newest reading is flagged, fewer than half of the window are good,
        they are too few, or the return moves.
        """
        newest = self._instrument.reading_of_now(then)
        if not seen(newest):
            why = ", ".join(newest.quality.words()).replace("_", " ")
            raise NotNow(f"the newest reading cannot be trusted ({why}): mend that, then {then}")
        window_s = self._instrument.window_s
        with self._lock:
            held = list(self._held)
        window = [r for r in held if newest.t_s - r.t_s < window_s]
        good = [r for r in window if seen(r)]
        if 2 * len(good) < len(window):
            raise NotNow(f"fewer than half of the readings averaged are good: wait, then {then}")
        if len(good) < FEWEST:
            raise NotNow(
                f"only {len(good)} readings in {window_s:g} s: average over longer, then {then}"
            )
        t_s, x, y, x_sd, y_sd = _columns(good)
        step, sway = (limit / self._arcsec_per_px for limit in (STILL_WITHIN_ARCSEC, SWAY_ARCSEC))
        for place, sd in ((x, x_sd), (y, y_sd)):
            if moves(t_s, place, float(np.median(sd)), step=step, sway=sway):
                raise NotNow(f"the mirror is moving: let it come to rest, then {then}")
        _, x_before, y_before, *_ = _columns([r for r in held if seen(r)])
        x_se, y_se = standard_error(x, x_before), standard_error(y, y_before)
        return Steady(
            x_px=float(x.mean()),
            y_px=float(y.mean()),
            cov_px2=(x_se**2, 0.0, y_se**2),
            n=len(good),
            window_s=window_s,
            t_s=newest.t_s,
        )

    @property
    def _arcsec_per_px(self) -> float:
        calibration = self._instrument.calibration
        if calibration is None:
            return ARCSEC_PER_PX
        return math.sqrt(math.prod(calibration.scale_arcsec_per_px))

    def _take(self, reading: Reading) -> None:
        keep_s = max(HISTORY_S[0], self._instrument.window_s)
        with self._lock:
            self._held.append(reading)
            while reading.t_s - self._held[0].t_s > keep_s:
                self._held.popleft()

    def _forget(self) -> None:
        with self._lock:
            self._held.clear()


def seen(reading: Reading) -> bool:
    """True for a position nobody has a doubt about, whether or not there is a scale."""
    return reading.quality is Quality.OK and math.isfinite(reading.x_px + reading.y_px)


def _columns(readings: list[Reading]) -> tuple[F64, F64, F64, F64, F64]:
    rows = [(r.t_s, r.x_px, r.y_px, r.x_sd_px, r.y_sd_px) for r in readings]
    t_s, x, y, x_sd, y_sd = np.array(rows, dtype=np.float64).T
    return t_s, x, y, x_sd, y_sd
