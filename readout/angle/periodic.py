"""A periodic error of known period among residuals.

By least squares, beside a polynomial of the place that is nobody's business here,

    residual = polynomial(place) + c cos(2 pi place / period) + s sin(2 pi place / period),

at places spaced in any way: the periodogram of N. R. Lomb (Astrophys. Space Sci. 39 (1976) 447),
with the polynomial for its mean. For normal noise the ratio of the two sums of squares that the
sine explains and leaves is Fisher's F with 2 degrees of freedom over the rest, exactly, which
gives the probability that chance alone does as much.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

import numpy as np
from scipy.special import fdtrc

from readout.least_squares import linear_least_squares
from readout.model import F64
from readout.rows import rounded

LEAST_COVERED = 0.15
"""Smallest singular value, of 1 for phases spread evenly, at which the sine can be told."""
MOST_CERTAIN = 2.0
"""An amplitude is below its estimate plus so many standard uncertainties (95 % and more)."""


@dataclass(frozen=True, slots=True)
class PeriodicError:
    """A sine of one period: amplitude sin(2 pi place / period + phase).

    ``along``: which coordinate, "x_px", "y_px" or "angle_arcsec"; ``period`` in its unit.
    ``chance``: probability that noise alone does as much. NaN where the places do not tell the
    sine from the polynomial.
    """

    along: str
    period: float
    amplitude_arcsec: float
    amplitude_u_arcsec: float
    phase_deg: float
    chance: float

    @property
    def told(self) -> bool:
        """False where the places lie too much alike within the period."""
        return math.isfinite(self.amplitude_arcsec)

    @property
    def at_most_arcsec(self) -> float:
        """What the amplitude is below, with 95 % confidence or more."""
        return self.amplitude_arcsec + MOST_CERTAIN * self.amplitude_u_arcsec

    @property
    def period_words(self) -> str:
        """The period with its unit, as a person reads it."""
        coordinate, unit = self.along.split("_")
        if unit == "px":
            return f"{self.period:g} px along {coordinate}"
        return f"{self.period:g}″ of the angle"

    def document(self) -> dict[str, Any]:
        """As JSON."""
        return {
            "along": self.along,
            "period": self.period,
            "amplitude_arcsec": rounded(self.amplitude_arcsec),
            "amplitude_u_arcsec": rounded(self.amplitude_u_arcsec),
            "phase_deg": rounded(self.phase_deg),
            # A chance is told by its order of magnitude, however small.
            "chance": float(f"{self.chance:.3g}") if math.isfinite(self.chance) else None,
        }


def polynomial(place: F64, degree: int) -> F64:
    """Columns 1, z, z^2 ... of the place brought to -1 ... 1, shape (n, degree + 1)."""
    middle, reach = (place.max() + place.min()) / 2, np.ptp(place) / 2
    z = (place - middle) / (reach if reach > 0 else 1.0)
    return np.vander(z, degree + 1, increasing=True)


def sine_columns(place: F64, period: float) -> F64:
    """Cosine and sine of the phase, shape (n, 2)."""
    phase = 2 * np.pi * place / period
    return np.stack([np.cos(phase), np.sin(phase)], axis=1)


def fit_periodic(
    place: F64, residual_arcsec: F64, period: float, *, beside: F64, along: str
) -> PeriodicError:
    """The sine of one period in the residuals, beside the columns ``beside`` (n, m).

    ``place`` (n,) and ``period`` in one unit, ``residual_arcsec`` (n,) of equal uncertainty, which
    their scatter tells. Raises numpy.linalg.LinAlgError if ``beside`` is not of full rank.
    """
    sine = sine_columns(place, period)
    basis, _ = np.linalg.qr(beside)
    alone = sine - basis @ (basis.T @ sine)
    spread = np.linalg.svd(alone, compute_uv=False) / math.sqrt(len(place) / 2)
    freedom = len(place) - beside.shape[1] - 2
    if freedom < 1 or spread[-1] < LEAST_COVERED:
        return PeriodicError(along, period, math.nan, math.nan, math.nan, math.nan)
    fit = linear_least_squares(np.concatenate([beside, sine], axis=1), residual_arcsec)
    c, s = fit.parameters[-2:]
    amplitude = math.hypot(c, s)
    cov = fit.cofactor[-2:, -2:] * fit.residual_sd**2
    towards = np.array([c, s]) / amplitude if amplitude > 0 else np.array([1.0, 0.0])
    without = residual_arcsec - basis @ (basis.T @ residual_arcsec)
    left = float(fit.residuals @ fit.residuals)
    explained = max(0.0, float(without @ without) - left)
    return PeriodicError(
        along=along,
        period=period,
        amplitude_arcsec=amplitude,
        amplitude_u_arcsec=math.sqrt(float(towards @ cov @ towards)),
        phase_deg=math.degrees(math.atan2(c, s)),
        chance=float(fdtrc(2, freedom, explained / 2 / (left / freedom))) if left > 0 else 0.0,
    )
