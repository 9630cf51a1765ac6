"""A drift held against the floor: claimed only where the instrument alone makes less."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Literal

from scipy.special import stdtrit

from readout.stability.floor import AxisFloor, Floor, spell_time
from readout.units import decimals_for, signed

EVEN_CHANCE = 0.975
"""Student's quantile for 95 % on both sides."""


@dataclass(frozen=True, slots=True)
class Drift:
    """A change over ``over_s``, as a straight line through the readings shows it.

    ``*_u_arcsec``: its standard uncertainty from its own scatter, 0 if the floor is to tell.
    """

    x_arcsec: float
    y_arcsec: float
    over_s: float
    x_u_arcsec: float = 0.0
    y_u_arcsec: float = 0.0


@dataclass(frozen=True, slots=True)
class Claim:
    """What may be said of the drift of one axis; ``limit_arcsec`` NaN where nothing is known."""

    axis: str
    change_arcsec: float
    limit_arcsec: float
    over_s: float
    verdict: Literal["claimed", "within_floor", "unknown"]

    def words(self, floor: Floor) -> str:
        """One sentence for a person."""
        time = spell_time(self.over_s)
        if self.verdict == "unknown":
            return (
                f"{self.axis}: a drift over {time} cannot be held against a null test of "
                f"{spell_time(floor.duration_s)}: repeat the null test for "
                f"{spell_time(1.5 * self.over_s)} or longer"
            )
        decimals = decimals_for(self.limit_arcsec, most=4)
        change = f"{signed(self.change_arcsec, decimals)}″ in {time}"
        limit = f"{self.limit_arcsec:.{decimals}f}″ (95 %)"
        if self.verdict == "claimed":
            return f"{self.axis}: {change}, more than the instrument makes by itself, {limit}"
        return (
            f"{self.axis}: no drift is claimed: {change} is no more than the instrument may make "
            f"by itself, {limit}"
        )


def claim_drift(drift: Drift, floor: Floor) -> tuple[Claim, Claim]:
    """What may be claimed, in x and in y.

    The limit is Student's factor, for the degrees of freedom of the null test at this time, on the
    floor's rms change and the drift's own uncertainty, joined as a sum of squares.
    """
    return (
        _claim("x", drift.x_arcsec, drift.x_u_arcsec, drift.over_s, floor, floor.x),
        _claim("y", drift.y_arcsec, drift.y_u_arcsec, drift.over_s, floor, floor.y),
    )


def claims(drift: Drift, floor: Floor) -> tuple[str, ...]:
    """The same in words, a sentence an axis."""
    return tuple(claim.words(floor) for claim in claim_drift(drift, floor))


def _claim(
    name: str, change_arcsec: float, u_arcsec: float, over_s: float, floor: Floor, axis: AxisFloor
) -> Claim:
    rms, freedom = floor.change_arcsec(axis, over_s)
    if not (math.isfinite(rms) and math.isfinite(change_arcsec)):
        return Claim(name, change_arcsec, math.nan, over_s, "unknown")
    limit = float(stdtrit(freedom, EVEN_CHANCE)) * math.hypot(rms, u_arcsec)
    verdict: Literal["claimed", "within_floor"] = (
        "claimed" if abs(change_arcsec) > limit else "within_floor"
    )
    return Claim(name, change_arcsec, limit, over_s, verdict)
