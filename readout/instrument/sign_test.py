"""The nudge test and the foil test, step by step, while the instrument measures.

Before each push the mirror rests and its place is taken; then the farthest it goes counts, so that
nobody has to press a button and a mirror at the same time.
"""

from __future__ import annotations

import math
import threading
from collections import deque
from dataclasses import dataclass, replace
from typing import Literal

import numpy as np

from readout.angle import Calibration
from readout.errors import NotNow
from readout.instrument.instrument import Instrument
from readout.instrument.signs_seen import (
    Foil,
    Outcome,
    Push,
    Verdict,
    judge,
    judge_foil,
    with_proven_signs,
)
from readout.instrument.steady import Steadiness, Steady, seen
from readout.model import Reading

Edge = Literal["top", "right"]
TOGETHER = 3
"""readings whose median counts as one place: a single bad one is no push"""


@dataclass(frozen=True, slots=True)
class FoilResult:
    """What the foil showed; ``right``: the scale agrees with it."""

    foil: Foil
    push: Push
    u_arcsec: float
    right: bool
    text: str


@dataclass(frozen=True, slots=True)
class SignState:
    """``peak``: the farthest from rest so far, while ``resting`` has been taken."""

    calibration: Calibration | None
    resting: bool
    peak: Push | None
    top: Push | None
    right: Push | None
    foil: FoilResult | None
    verdict: Verdict


class SignTest:
    """One test at a time, of the calibration in use when it began."""

    def __init__(self, instrument: Instrument, steadiness: Steadiness) -> None:
        self._instrument = instrument
        self._steadiness = steadiness
        self._lock = threading.RLock()
        self._calibration: Calibration | None = None
        self._rest: Steady | None = None
        self._rest_arcsec = (math.nan, math.nan)
        self._recent: deque[tuple[float, float]] = deque(maxlen=TOGETHER)
        self._peak: Push | None = None
        self._pushes: dict[Edge, Push] = {}
        self._foil: FoilResult | None = None
        instrument.on_reading.append(self._take)
        instrument.on_state.append(lambda *_: self._lose_rest())

    @property
    def state(self) -> SignState:
        with self._lock:
            self._follow_calibration()
            top, right = self._pushes.get("top"), self._pushes.get("right")
            return SignState(
                self._calibration,
                self._rest is not None,
                self._peak,
                top,
                right,
                self._foil,
                judge(top, right),
            )

    def rest(self) -> SignState:
        """Take the mirror's place at rest. Raises NotNow while it moves, or without a scale."""
        with self._lock:
            self._follow_calibration()
            if self._calibration is None:
                raise NotNow("there is no scale yet: give one, a nominal one will do")
            self._rest = rest = self._steadiness.now("say that it rests")
            x, y = self._calibration.tilt(rest.x_px, rest.y_px)
            self._rest_arcsec = float(x), float(y)
            self._recent.clear()
            self._peak = None
        return self.state

    def pressed(self, edge: Edge) -> SignState:
        """The edge has been pressed since the rest was taken: the farthest it went counts.

        Raises NotNow without a rest, BadInput for a push that shows nothing.
        """
        with self._lock:
            self._follow_calibration()
            if self._rest is None:
                raise NotNow("first let the mirror rest and say so, then press its edge")
            push = self._peak or Push(0.0, 0.0)
            _ = push.along  # raises for one that shows nothing
            self._pushes[edge] = push
            self._lose_rest()
        return self.state

    def foil(self, foil: Foil) -> SignState:
        """The foil lies under the far foot now, and nothing lay there when the rest was taken.

        Raises NotNow without a rest or while the mirror moves, BadInput if nothing is to be seen.
        """
        with self._lock:
            self._follow_calibration()
            rest, calibration = self._rest, self._calibration
            if rest is None or calibration is None:
                raise NotNow("first take the rest without the foil, then put it under")
            now = self._steadiness.now("take the foil")
            x, y = (float(v) for v in calibration.tilt(now.x_px, now.y_px))
            push = Push(x - self._rest_arcsec[0], y - self._rest_arcsec[1])
            axis, _ = push.along
            u_arcsec = _difference_u(calibration, rest, now, axis)
            right, text = judge_foil(foil, push, u_arcsec)
            self._pushes["top"] = push
            self._foil = FoilResult(foil, push, u_arcsec, right, text)
            self._lose_rest()
        return self.state

    def start_over(self) -> SignState:
        """Forget what has been seen."""
        with self._lock:
            self._calibration = self._instrument.calibration
            self._pushes, self._foil = {}, None
            self._lose_rest()
        return self.state

    def proven(self, *, name: str, created_utc: str) -> Calibration:
        """The calibration with its axes as the pushes showed them, under an id of its own.

        Raises NotNow until both edges have been pressed and agree.
        """
        now = self.state
        if now.calibration is None or now.verdict.turn is None:
            raise NotNow(f"the signs are not proven: {now.verdict.text}")
        if now.calibration.signs == "proven" and now.verdict.outcome is Outcome.PROVEN:
            raise NotNow("this calibration's signs are proven already: nothing is to be kept")
        before = now.calibration
        made = with_proven_signs(before, now.verdict.turn)
        return replace(
            made,
            created_utc=created_utc,
            made_from={
                **before.made_from,
                "name": name,
                "signs": {
                    "from": before.id,
                    "outcome": now.verdict.outcome.value,
                    "top_arcsec": _pair(now.top),
                    "right_arcsec": _pair(now.right),
                    "foil": None if now.foil is None else now.foil.text,
                },
            },
        )

    # -- called by the acquisition ------------------------------------------------------------

    def _take(self, reading: Reading) -> None:
        if self._rest is None or not seen(reading):
            return
        with self._lock:
            calibration = self._calibration
            if calibration is None:
                return
            x, y = calibration.tilt(reading.x_px, reading.y_px)
            self._recent.append((float(x) - self._rest_arcsec[0], float(y) - self._rest_arcsec[1]))
            if len(self._recent) < TOGETHER:
                return
            push = Push(*np.median(np.array(self._recent), axis=0).tolist())
            if self._peak is None or _size(push) > _size(self._peak):
                self._peak = push

    def _lose_rest(self) -> None:
        with self._lock:
            self._rest, self._peak = None, None

    def _follow_calibration(self) -> None:
        """What was seen with another scale says nothing of this one."""
        now = self._instrument.calibration
        if self._calibration is None or now is None or now.id != self._calibration.id:
            self._calibration = now
            self._pushes, self._foil = {}, None
            self._lose_rest()


def _size(push: Push) -> float:
    return math.hypot(push.x_arcsec, push.y_arcsec)


def _pair(push: Push | None) -> list[float] | None:
    return None if push is None else [round(push.x_arcsec, 3), round(push.y_arcsec, 3)]


def _difference_u(calibration: Calibration, rest: Steady, now: Steady, axis: int) -> float:
    """Combined standard uncertainty of the tilt's change along an axis, arcsec."""
    share = calibration.difference_cov(now.x_px, now.y_px, rest.x_px, rest.y_px)[axis, axis]
    noise = sum(
        calibration.noise_cov(place.x_px, place.y_px, place.cov_px2)[axis, axis]
        for place in (rest, now)
    )
    return math.sqrt(max(0.0, float(share)) + float(noise))
