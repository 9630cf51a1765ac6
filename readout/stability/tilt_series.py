"""A record of tilts as columns: what drift and floor are made of."""

from __future__ import annotations

from dataclasses import dataclass

from readout.model import F64


@dataclass(frozen=True, slots=True)
class TiltSeries:
    """Columns of one length n, in order of time: seconds, and tilts in arc-seconds.

    NaN for a tilt that is missing or flagged; ``flagged``: how many rows have a caution.
    """

    t_s: F64
    x_arcsec: F64
    y_arcsec: F64
    flagged: int = 0
