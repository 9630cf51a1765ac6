"""One arm of a reticle: a bar of light, blurred by a Gaussian and integrated over each pixel.

A straight bar's mean over a pixel depends only on the distance of the pixel's centre from the
middle of the bar. It is tabulated as a function of that distance: along the side of the pixel that
the bar crosses more steeply the integral of a blurred edge is closed, b (z Phi(z) + phi(z)), along
the other one it is a Gauss-Legendre rule; between the table's entries a cubic spline leaves 1e-7
of the contrast at a blur of 0.3 px and less above. Only pixels near an end of the bar need a
product rule over the pixel.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from functools import lru_cache
from typing import Final

import numpy as np
from numpy.typing import NDArray
from scipy.interpolate import CubicSpline
from scipy.special import ndtr

from readout.model import F64

Index = NDArray[np.intp]

TAIL_SIGMAS: Final = 7.0
"""A blurred edge is complete to 1e-12 this many sigmas away; nothing is computed beyond."""

LEAST_BLUR_PX: Final = 0.3
"""No lens and pixel is sharper than this; a sharper edge would need a finer rule."""

HALF_DIAGONAL_PX: Final = math.sqrt(0.5)

TABLE_STEPS_PER_PX: Final = 64


def bar(u: F64, half_width_px: float | F64, blur_px: float) -> F64:
    """Share of full brightness at distance ``u`` from the middle of a blurred bar, any shape."""
    return np.asarray(ndtr((u + half_width_px) / blur_px) - ndtr((u - half_width_px) / blur_px))


def pixel_nodes(order: int) -> list[tuple[float, float, float]]:
    """Product Gauss-Legendre rule of the unit square about 0: (dx, dy, weight), weights sum 1."""
    nodes, weights = np.polynomial.legendre.leggauss(order)
    return [
        (float(dx) / 2, float(dy) / 2, float(wx * wy) / 4)
        for dy, wy in zip(nodes, weights, strict=True)
        for dx, wx in zip(nodes, weights, strict=True)
    ]


def order_for(blur_px: float) -> int:
    """Nodes that leave 5e-7: the derivatives of an edge grow as the blur shrinks."""
    return 4 if blur_px >= 0.6 else 6


def pixel_means(share_at: Callable[[F64, F64], F64], x: F64, y: F64, blur_px: float) -> F64:
    """Means of ``share_at(x, y)`` over the pixels centred at ``x, y``, by the product rule."""
    mean = np.zeros(x.shape)
    for dx, dy, weight in pixel_nodes(order_for(blur_px)):
        mean += weight * share_at(x + dx, y + dy)
    return mean


@dataclass(frozen=True, slots=True)
class Bar:
    """A bar through the origin, its ends and a gap in its middle as soft as its edges.

    ``normal_rad``: direction across it, from +x towards +y. It reaches ``half_length_px`` either
    way and is missing within ``gap_px`` of the origin; ``slide_px`` moves ends and gap along it.
    """

    half_width_px: float
    blur_px: float
    normal_rad: float
    half_length_px: float = math.inf
    gap_px: float = 0.0
    slide_px: float = 0.0

    def across(self, x: F64, y: F64) -> F64:
        """Distance from the middle line."""
        return np.asarray(math.cos(self.normal_rad) * x + math.sin(self.normal_rad) * y)

    def along(self, x: F64, y: F64) -> F64:
        """Distance along the bar from the middle between its ends."""
        along = math.cos(self.normal_rad) * y - math.sin(self.normal_rad) * x
        return np.asarray(along - self.slide_px)

    def share_at(self, x: F64, y: F64) -> F64:
        """Share of full brightness at points: exactly the blurred rectangles."""
        along = self.along(x, y)
        there = bar(along, self.half_length_px, self.blur_px)
        if self.gap_px > 0:
            there = there - bar(along, self.gap_px, self.blur_px)
        return bar(self.across(x, y), self.half_width_px, self.blur_px) * there

    @property
    def endless(self) -> bool:
        """True for a bar without ends and without a gap."""
        return math.isinf(self.half_length_px) and self.gap_px == 0

    @property
    def reach_px(self) -> float:
        """No pixel whose centre is farther off the middle line sees anything of the bar."""
        return self.half_width_px + TAIL_SIGMAS * self.blur_px + HALF_DIAGONAL_PX

    def near(self, columns: F64, rows: F64) -> tuple[Index, Index]:
        """Indices (row, column) of the pixels within reach, of a grid given by its two sides."""
        c, s = math.cos(self.normal_rad), math.sin(self.normal_rad)
        if abs(c) < abs(s):
            column, row = Bar(self.half_width_px, self.blur_px, math.pi / 2 - self.normal_rad).near(
                rows, columns
            )
            return row, column
        if columns.size == 0:
            return np.zeros(0, np.intp), np.zeros(0, np.intp)
        half = self.reach_px / abs(c)
        first = np.ceil(-s / c * rows - half - columns[0]).astype(np.intp)
        column = first[:, None] + np.arange(math.floor(2 * half) + 1)
        row = np.broadcast_to(np.arange(rows.size)[:, None], column.shape)
        inside = (column >= 0) & (column < columns.size)
        return row[inside], column[inside]

    def means(self, x: F64, y: F64) -> F64:
        """Means over the pixels centred at ``x, y``, which are within reach."""
        profile = straight_profile(self.half_width_px, self.blur_px, self.normal_rad)
        mean = profile(self.across(x, y))
        if self.endless:
            return np.asarray(mean)
        soft_px = TAIL_SIGMAS * self.blur_px + HALF_DIAGONAL_PX
        off = np.abs(self.along(x, y))
        mean[(off > self.half_length_px + soft_px) | (off < self.gap_px - soft_px)] = 0.0
        soft = np.abs(off - self.half_length_px) <= soft_px
        if self.gap_px > 0:
            soft |= np.abs(off - self.gap_px) <= soft_px
        mean[soft] = pixel_means(self.share_at, x[soft], y[soft], self.blur_px)
        return np.asarray(mean)


@lru_cache(maxsize=64)
def straight_profile(half_width_px: float, blur_px: float, normal_rad: float) -> CubicSpline:
    """Mean over a pixel of a bar without ends, by the distance of the pixel's centre from it."""
    c, s = abs(math.cos(normal_rad)), abs(math.sin(normal_rad))
    steep, flat = max(c, s), min(c, s)
    reach = half_width_px + TAIL_SIGMAS * blur_px + 2 * HALF_DIAGONAL_PX
    n = math.ceil(reach * TABLE_STEPS_PER_PX)
    u = np.arange(-n, n + 1) / TABLE_STEPS_PER_PX

    def integral(distance: F64) -> F64:
        z = distance / blur_px
        density = np.exp(-0.5 * z**2) / math.sqrt(2 * math.pi)
        return np.asarray(blur_px * (z * ndtr(z) + density))

    mean = np.zeros(u.size)
    for node, weight in zip(*np.polynomial.legendre.leggauss(8), strict=True):
        v = u + flat * node / 2
        for side in (half_width_px, -half_width_px):
            rise = integral(v + side + steep / 2) - integral(v + side - steep / 2)
            mean += math.copysign(weight / 2 / steep, side) * rise
    return CubicSpline(u, mean)
