"""The zero: the averaged value somebody chose to count from."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from readout.angle import Calibration
from readout.errors import NotNow
from readout.instrument.averaging import Average, Rows, Statistic
from readout.instrument.stillness import moving
from readout.model import F64, Reading

I64 = NDArray[np.int64]


@dataclass(frozen=True, slots=True)
class Zero:
    """Where zero is, and how well: ``*_sd_arcsec`` is the standard error of the average taken."""

    x_arcsec: float
    y_arcsec: float
    x_sd_arcsec: float
    y_sd_arcsec: float
    n: int
    window_s: float
    statistic: Statistic
    set_utc_ns: int


@dataclass(frozen=True, slots=True)
class Reference:
    """A zero with what readings relative to it need.

    ``calibration``: the one both are made with. ``from_seq``: the first reading that is measured
    with it from the source of the zero.
    """

    zero: Zero
    calibration: Calibration
    from_seq: int

    def relative_u(
        self, seq: I64, x_px: F64, y_px: F64, x_sd_arcsec: F64, y_sd_arcsec: F64
    ) -> tuple[F64, F64]:
        """Combined standard uncertainty of the tilt minus the zero, for readings (n,), in arcsec.

        It joins the calibration's share of the difference, the noise of the row and the standard
        error of the zero, uncorrelated with each other (JCGM 100:2008, 5.1.2). NaN for readings
        without a position and for those before ``from_seq``.
        """
        zero = self.zero
        zero_x_px, zero_y_px = self.calibration.position(zero.x_arcsec, zero.y_arcsec)
        known = np.where(seq >= self.from_seq, 1.0, np.nan)
        with np.errstate(over="ignore", invalid="ignore"):  # far beyond any picture: no number
            share = self.calibration.difference_cov(
                x_px * known, y_px * known, float(zero_x_px), float(zero_y_px)
            )
            return (
                np.sqrt(share[..., 0, 0] + x_sd_arcsec**2 + zero.x_sd_arcsec**2),
                np.sqrt(share[..., 1, 1] + y_sd_arcsec**2 + zero.y_sd_arcsec**2),
            )


def zero_from(newest: Reading, rows: Rows, average: Average, *, now_utc_ns: int) -> Zero:
    """The zero at ``average``, that of ``rows``, the readings of the window, which end with
    ``newest``.

    Raises NotNow while the newest reading is flagged, the average is void or the mirror moves.
    """
    if not newest.good:
        why = ", ".join(newest.quality.words()).replace("_", " ") or "no scale"
        raise NotNow(f"the newest reading cannot be trusted ({why}): mend that, then set the zero")
    if not average.valid:
        raise NotNow("fewer than half of the readings averaged are good: wait, then set the zero")
    if moving(rows):
        raise NotNow("the mirror is moving: let it come to rest, then set the zero")
    return Zero(
        x_arcsec=average.x_arcsec,
        y_arcsec=average.y_arcsec,
        x_sd_arcsec=average.x_se_arcsec,
        y_sd_arcsec=average.y_se_arcsec,
        n=average.n,
        window_s=average.window_s,
        statistic=average.statistic,
        set_utc_ns=now_utc_ns,
    )
