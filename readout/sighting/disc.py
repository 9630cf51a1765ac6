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
from functools import lru_cache

import numpy as np
from scipy.special import chndtr, i0e, i1e

from readout.model import F64

STEPS = 8
"""entries of the table in a blur"""
DARK = 7.0
"""blurs beyond the edge at which the light is 1e-11"""
EDGES = 64
"""tables for so many radii in a blur; between them the derivative by the edge leaves 2e-5"""


@dataclass(frozen=True, slots=True)
class DiscProfile:
    """F / F(0) at the points asked for, and its derivatives; the one by r is divided by r."""

    value: F64
    by_r_over_r: F64
    by_edge: F64


@dataclass(frozen=True, slots=True)
class _Table:
    """Coefficients of the cubics of the value and of the straight pieces of its derivatives."""

    value: tuple[F64, F64, F64, F64]
    slope: tuple[F64, F64]
    by_edge: tuple[F64, F64]


def disc_profile(r: F64, edge: float) -> DiscProfile:
    """Profile of height 1 at distances ``r`` >= 0 from the middle of a disc of radius ``edge`` > 0.

    Both in units of the blur; ``r`` of any shape. From a table: the value by cubics that join with
    the exact slope, good to 2e-5, the derivatives straight between its entries.
    """
    nearest = max(1, round(edge * EDGES))
    table = _table(nearest)
    place = np.minimum(r * STEPS, len(table.by_edge[0]) - 0.001)
    index = place.astype(np.intp)
    t = place - index
    value, rise, turn, bend = (part[index] for part in table.value)
    by_edge = table.by_edge[0][index] + t * table.by_edge[1][index]
    value = value + t * (rise + t * (turn + t * bend)) + (edge - nearest / EDGES) * by_edge
    return DiscProfile(value, table.slope[0][index] + t * table.slope[1][index], by_edge)


def half_maximum(edge: float) -> float:
    """Distance from the middle at which the profile has fallen to one half, in units of the blur;
    good to 0.01.
    """
    value = _table(max(1, round(edge * EDGES))).value[0]
    return float(np.interp(-0.5, -value, np.arange(len(value)) / STEPS))


@lru_cache(maxsize=1024)
def _table(edge_steps: int) -> _Table:
    edge = edge_steps / EDGES
    nodes = np.arange(math.ceil((edge + DARK) * STEPS) + 2) / STEPS
    top = -math.expm1(-0.5 * edge * edge)
    value = chndtr(edge * edge, 2.0, nodes * nodes) / top
    rim = np.exp(-0.5 * (nodes - edge) ** 2) * (edge / top)
    crossed = np.maximum(nodes * edge, 1e-12)
    slope_over_r = -rim * edge * i1e(crossed) / crossed
    by_edge = rim * i0e(crossed) - value * (edge / top * math.exp(-0.5 * edge * edge))
    slope = slope_over_r * (nodes / STEPS)
    rise = np.diff(value)
    bend = slope[:-1] + slope[1:] - 2 * rise
    return _Table(
        (value[:-1], slope[:-1], rise - slope[:-1] - bend, bend),
        (slope_over_r[:-1], np.diff(slope_over_r)),
        (by_edge[:-1], np.diff(by_edge)),
    )
