"""A line's width as a number to focus by: what it is now, what the best was.

The number is the standard deviation of the line's light across the arm, from the fitted line and
its blur:

    spread^2 = blur^2 + line^2 / 12   (a bar of width w has the variance w^2 / 12)

Variances of profiles add when one blurs the other, whatever their shapes. So the square grows
with the square of the defocus from any least value on, while the full width at half maximum of a
wide line hardly knows its blur, and of a thin one line and blur are only known together.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from typing import Any

import numpy as np

from readout.model import Arm, Sighting
from readout.rows import rounded

FWHM_PER_SD = 2 * math.sqrt(2 * math.log(2))
KEPT = 600
"""Samples a trace keeps, besides its best."""
FIRST_SD_SHARE = 0.01
"""How well a width is taken to be known before its own scatter has shown it."""
LOOKED_AT = 60
FEW = 6
NOTICED_SD = 8.0
"""Worse than the best by this many standard deviations is worse: the best of many is lucky."""


def line_spread_px(arm: Arm | None) -> float:
    """Standard deviation of the light across an arm, NaN without one."""
    if arm is None:
        return math.nan
    spread = math.sqrt(arm.blur_px**2 + arm.line_px**2 / 12)
    return arm.width_px / FWHM_PER_SD if math.isnan(spread) else spread


@dataclass(frozen=True, slots=True)
class FocusSample:
    """Spread of both arms' lines, NaN for one not seen, and the screw's position if it is known."""

    upright_px: float
    level_px: float
    position_mm: float | None = None

    @property
    def spread_px(self) -> float:
        """One number for both: the root of their mean square; the one seen where one is missing.

        It is least midway between the arms' own best places where those differ.
        """
        seen = [s for s in (self.upright_px, self.level_px) if math.isfinite(s)]
        return math.sqrt(sum(s * s for s in seen) / len(seen)) if seen else math.nan


def focus_sample(sighting: Sighting, position_mm: float | None = None) -> FocusSample:
    """The sample that one sighting gives."""
    return FocusSample(
        line_spread_px(sighting.upright), line_spread_px(sighting.level), position_mm
    )


@dataclass(frozen=True, slots=True)
class FocusTrace:
    """What was seen while the screw was turned: the latest samples, oldest first, and the best.

    Only samples with both arms are compared, if there is one with both.
    """

    samples: tuple[FocusSample, ...] = ()
    best: FocusSample | None = None

    def add(self, sample: FocusSample) -> FocusTrace:
        """The trace with one more sample."""
        return FocusTrace((*self.samples, sample)[-KEPT:], _better(self.best, sample))

    @property
    def now(self) -> FocusSample | None:
        return self.samples[-1] if self.samples else None

    @property
    def sd_px(self) -> float:
        """Standard deviation of one sample, from how far it lies off the middle of its neighbours.

        Second differences, so that a screw turned steadily does not count, and their median, so
        that a jump does not (as von Neumann's mean square successive difference, Ann. Math. Stat.
        12 (1941) 367; 0.6745 is the median size of a standard normal value).
        """
        spread = np.array([s.spread_px for s in self.samples[-LOOKED_AT:]])
        bends = np.abs(np.diff(spread[np.isfinite(spread)], n=2))
        if bends.size < FEW:
            return math.nan if self.best is None else FIRST_SD_SHARE * self.best.spread_px
        return float(np.median(bends)) / 0.6745 / math.sqrt(6)

    @property
    def past_best(self) -> bool:
        """True if the line is wider now than it has been, beyond its noise."""
        now, best = self.now, self.best
        if now is None or best is None:
            return False
        return now.spread_px - best.spread_px > NOTICED_SD * self.sd_px

    def words(self) -> str:
        """One line for the person who turns the screw."""
        now, best = self.now, self.best
        if now is None:
            return "no picture yet"
        if best is None or math.isnan(now.spread_px):
            return "no line in view: turn until one appears, even a wide one"
        where = "" if best.position_mm is None else f" at {best.position_mm:.2f} mm"
        if self.past_best:
            return (
                f"{now.spread_px:.2f} px now, {best.spread_px:.2f} px was the best{where}: turn "
                "back"
            )
        if now is best:
            return f"{now.spread_px:.2f} px, the best so far: go on"
        return (
            f"{now.spread_px:.2f} px, as good as the best so far ({best.spread_px:.2f} px{where})"
        )

    def document(self) -> dict[str, Any]:
        """As JSON: columns, a missing value null."""
        return {
            "position_mm": [
                None if s.position_mm is None else rounded(s.position_mm) for s in self.samples
            ],
            "upright_px": [rounded(s.upright_px) for s in self.samples],
            "level_px": [rounded(s.level_px) for s in self.samples],
            "spread_px": [rounded(s.spread_px) for s in self.samples],
            "best_px": None if self.best is None else rounded(self.best.spread_px),
            "best_position_mm": None if self.best is None else self.best.position_mm,
            "past_best": self.past_best,
            "words": self.words(),
        }


def forget_best(trace: FocusTrace) -> FocusTrace:
    """The trace started anew from its last sample: after the target or the light has changed."""
    kept = trace.samples[-1:]
    return replace(trace, samples=kept, best=_better(None, kept[0]) if kept else None)


def _better(best: FocusSample | None, sample: FocusSample) -> FocusSample | None:
    if math.isnan(sample.spread_px):
        return best
    if best is None or _arms(sample) > _arms(best):
        return sample
    better = _arms(sample) == _arms(best) and sample.spread_px < best.spread_px
    return sample if better else best


def _arms(sample: FocusSample) -> int:
    return math.isfinite(sample.upright_px) + math.isfinite(sample.level_px)
