"""The profile of a spot: a uniform disc, the image of a pinhole, blurred by a Gaussian.

With distances in units of the blur, a disc of radius h and a distance r from its middle, the light
at r is the probability that a normal deviate about r falls into the disc:

    F(r) = P(h^2; 2, r^2),

the non-central chi-square distribution with two degrees of freedom (the circular coverage
function; A. R. DiDonato and M. P. Jarnagin, Math. Comp. 15 (1961) 347). As h goes to 0 it becomes
the Gaussian, as h grows the flat disc. Its derivatives are Bessel functions.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from scipy.special import chndtr, i0e, i1e

from readout.model import F64


@dataclass(frozen=True, slots=True)
class DiscProfile:
    """F / F(0) at the points asked for, and its derivatives; the one by r is divided by r."""

    value: F64
    by_r_over_r: F64
    by_edge: F64


def disc_profile(r: F64, edge: float) -> DiscProfile:
    """Profile of height 1 at distances ``r`` >= 0 from the middle of a disc of radius ``edge`` > 0.

    Both in units of the blur; ``r`` of any shape.
    """
    top = -math.expm1(-0.5 * edge * edge)
    value = chndtr(edge * edge, 2.0, r * r) / top
    rim = np.exp(-0.5 * (r - edge) ** 2) * (edge / top)
    crossed = np.maximum(r * edge, 1e-12)
    return DiscProfile(
        value=value,
        by_r_over_r=-rim * edge * i1e(crossed) / crossed,
        by_edge=rim * i0e(crossed) - value * (edge / top * math.exp(-0.5 * edge * edge)),
    )


def half_maximum(edge: float) -> float:
    """Distance from the middle at which the profile has fallen to one half, in units of the blur.

    From a fine table.
    """
    r = np.linspace(0.0, edge + 2.0, 96)
    return float(np.interp(-0.5, -disc_profile(r, edge).value, r))
