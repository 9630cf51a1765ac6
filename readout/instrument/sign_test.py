"""The nudge test and the foil test, step by step, while the instrument measures.

Before each push the mirror rests and its place is taken; then the farthest it goes counts, so that
nobody has to press a button and a mirror at the same time. What is seen is judged in
``readout.angle.signs``.
"""

from __future__ import annotations

import math
import threading
from collections import deque
from dataclasses import dataclass, replace
from enum import StrEnum
from typing import Literal

import numpy as np

from readout.angle import Calibration
from readout.angle.signs import (
    Change,
    Direction,
    Foil,
    SignVerdict,
    axes_shown,
    judge_foil,
    judge_nudge,
    with_signs,
)
from readout.errors import BadInput, NotNow
from readout.instrument.instrument import Instrument
from readout.instrument.steady import Steadiness, Steady, seen
from readout.model import Reading

Edge = Literal["top", "right"]
Test = Literal["top", "right", "foil"]
TOGETHER = 3
"""readings whose median counts as one place: a single bad one is no push"""


class Outcome(StrEnum):
    """What the tests show together."""

    UNPROVEN = "unproven"
    """not enough has been seen"""
    PROVEN = "proven"
    MIRRORED = "mirrored"
    """one axis runs backwards, or both"""
    SWAPPED = "swapped"
    """X and Y are exchanged"""


@dataclass(frozen=True, slots=True)
class SignState:
    """``peak``: the farthest from rest so far, while ``resting`` has been taken. ``tests``: those
    that showed something; ``foil``: what was laid under.
    """

    calibration: Calibration | None
    resting: bool
    peak: tuple[float, float] | None
    tests: dict[Test, SignVerdict]
    foil: Foil | None
    outcome: Outcome
    text: str


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
        self._peak: Change | None = None
        self._tests: dict[Test, SignVerdict] = {}
        self._foil: Foil | None = None
        instrument.on_reading.append(self._take)
        instrument.on_state.append(lambda *_: self._lose_rest())

    @property
    def state(self) -> SignState:
        with self._lock:
            self._follow_calibration()
            outcome, text = _together(self._tests)
            return SignState(
                calibration=self._calibration,
                resting=self._rest is not None,
                peak=None if self._peak is None else self._peak.values,
                tests=dict(self._tests),
                foil=self._foil,
                outcome=outcome,
                text=text,
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

        Raises NotNow without a rest, BadInput for a push that shows nothing clear.
        """
        with self._lock:
            self._follow_calibration()
            if self._rest is None:
                raise NotNow("first let the mirror rest and say so, then press its edge")
            push = self._peak or Change(0.0, 0.0, 0.0, 0.0)
            self._note(edge, judge_nudge(edge, push))
        return self.state

    def foil(self, foil: Foil) -> SignState:
        """The foil lies under the far foot now, and nothing lay there when the rest was taken.

        Raises NotNow without a rest or while the mirror moves, BadInput if nothing clear is seen.
        """
        with self._lock:
            self._follow_calibration()
            rest, calibration = self._rest, self._calibration
            if rest is None or calibration is None:
                raise NotNow("first take the rest without the foil, then put it under")
            now = self._steadiness.now("take the foil")
            x, y = (float(v) for v in calibration.tilt(now.x_px, now.y_px))
            x_u, y_u = _difference_u(calibration, rest, now)
            change = Change(x - self._rest_arcsec[0], y - self._rest_arcsec[1], x_u, y_u)
            self._note("foil", judge_foil(foil, change))
            self._foil = foil
        return self.state

    def start_over(self) -> SignState:
        """Forget what has been seen."""
        with self._lock:
            self._tests, self._foil = {}, None
            self._lose_rest()
        return self.state

    def shown(self, *, name: str, created_utc: str) -> Calibration:
        """The calibration with its axes as the tests have shown them, its signs proven.

        Raises NotNow until both axes have been shown, or where there is nothing new to keep.
        """
        now = self.state
        if now.calibration is None or now.outcome is Outcome.UNPROVEN:
            raise NotNow(f"the signs are not proven: {now.text}")
        before = now.calibration
        if before.signs == "proven" and now.outcome is Outcome.PROVEN:
            raise NotNow("this calibration's signs are proven already: nothing is to be kept")
        made = with_signs(before, tuple(now.tests.values()), done_utc=created_utc)
        made_from = {**before.made_from, "signs_of": before.id}
        if name:
            made_from["name"] = name
        return replace(made, created_utc=created_utc, made_from=made_from)

    def _note(self, test: Test, verdict: SignVerdict) -> None:
        if verdict.direction is Direction.UNCLEAR:
            raise BadInput(verdict.text)
        self._tests[test] = verdict
        self._lose_rest()

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
            x_change, y_change = np.median(np.array(self._recent), axis=0).tolist()
            if self._peak is None or math.hypot(x_change, y_change) > math.hypot(
                *self._peak.values
            ):
                cov_px2 = reading.x_sd_px**2, 0.0, reading.y_sd_px**2
                noise = calibration.noise_cov(reading.x_px, reading.y_px, cov_px2)
                x_sd, y_sd = np.sqrt(np.diag(noise)).tolist()
                self._peak = Change(x_change, y_change, x_sd, y_sd)

    def _lose_rest(self) -> None:
        with self._lock:
            self._rest, self._peak = None, None

    def _follow_calibration(self) -> None:
        """What was seen with another scale says nothing of this one."""
        now = self._instrument.calibration
        if self._calibration is None or now is None or now.id != self._calibration.id:
            self._calibration = now
            self._tests, self._foil = {}, None
            self._lose_rest()


def _together(tests: dict[Test, SignVerdict]) -> tuple[Outcome, str]:
    """What all tests show, and what to do about it."""
    verdicts = tuple(tests.values())
    try:
        axes = axes_shown(verdicts)
    except BadInput as error:
        return Outcome.UNPROVEN, str(error)
    if axes is None:
        made = {verdict.made for verdict in verdicts}
        missing = [edge for axis, edge in ((1, "top"), (0, "right")) if axis not in made]
        return Outcome.UNPROVEN, f"still to be pressed: the {' and the '.join(missing)} edge"
    if np.array_equal(axes, np.eye(2)):
        return Outcome.PROVEN, "both axes run the way they should"
    wrong = "; ".join(v.text for v in verdicts if v.direction is not Direction.RIGHT)
    if axes[0, 0] == 0:
        return Outcome.SWAPPED, (
            f"X and Y are exchanged: {wrong}. The camera stands on its side, or the axes of the "
            "calibration were mistaken: turn the camera by a quarter, or take the axes as shown"
        )
    return Outcome.MIRRORED, (
        f"the picture is a mirror image of what was taken for granted: {wrong}. Choose another "
        "mounting, or take the axes as shown"
    )


def _difference_u(calibration: Calibration, rest: Steady, now: Steady) -> tuple[float, float]:
    """Combined standard uncertainty of the tilt's change in X and Y, arcsec."""
    cov = calibration.difference_cov(now.x_px, now.y_px, rest.x_px, rest.y_px)
    for place in (rest, now):
        cov = cov + calibration.noise_cov(place.x_px, place.y_px, place.cov_px2)
    x_u, y_u = np.sqrt(np.maximum(np.diag(cov), 0.0)).tolist()
    return x_u, y_u
