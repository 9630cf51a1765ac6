"""The profile across one arm: a bar, blurred by a Gaussian, integrated over the pixel.

With half width h, blur s and a pixel of width c along u (the pixel is c = cos(turn) wide in the
direction across an arm turned by that angle; the short side of its turned outline, sin(turn),
only adds sin^2/12 to s^2 and is absorbed by it):

    F(u) = (s/c) [G(z1) - G(z2) - G(z3) + G(z4)],   G(z) = z Phi(z) + phi(z)

z = (u + h + c/2)/s, (u + h - c/2)/s, (u - h + c/2)/s, (u - h - c/2)/s, Phi and phi the normal
distribution and density: the twice integrated Gaussian, differenced over the bar and the pixel.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from scipy.special import ndtr

from readout.model import F64


@dataclass(frozen=True, slots=True)
class Profile:
    """F and its partial derivatives at the points asked for, each of their shape."""

    value: F64
    by_u: F64
    by_half_width: F64
    by_blur: F64


def line_profile(u: F64, half_width: float, blur: float, pixel: float = 1.0) -> Profile:
    """Profile of a line of height 1 at distances ``u`` from its middle; all lengths in pixels."""
    edge, side = half_width / blur, pixel / (2 * blur)
    at = u / blur
    z = np.empty((4, *u.shape))
    for place, offset in enumerate((edge + side, edge - side, side - edge, -edge - side)):
        np.add(at, offset, out=z[place])
    parts = np.empty((3, *z.shape))
    below, density, twice = parts
    ndtr(z, out=below)
    np.multiply(z, z, out=density)
    density *= -0.5
    np.exp(density, out=density)
    density *= 1 / math.sqrt(2 * math.pi)
    np.multiply(z, below, out=twice)
    twice += density
    of_edges = (parts[:, ::2] - parts[:, 1::2]) * (1 / pixel)
    by_u, by_blur, value = of_edges[:, 0] - of_edges[:, 1]
    return Profile(
        value=value * blur,
        by_u=by_u,
        by_half_width=of_edges[0, 0] + of_edges[0, 1],
        by_blur=by_blur,
    )


def peak_height(half_width: float, blur: float) -> float:
    """Height of the profile in its middle, with pixels of width 1."""
    return _value_and_rise(0.0, half_width, blur)[0]


def half_maximum(half_width: float, blur: float) -> float:
    """Full width at half maximum of the profile, px, by Newton's method."""
    half = peak_height(half_width, blur) / 2
    u = max(half_width, 1.18 * blur)
    for _ in range(6):
        value, rise = _value_and_rise(u, half_width, blur)
        if not rise < 0:
            break
        step = (value - half) / rise
        u -= step
        if abs(step) < 1e-4:
            break
    return 2 * u


def _value_and_rise(u: float, half_width: float, blur: float) -> tuple[float, float]:
    """F and its derivative at one place, in plain numbers: it is asked of every arm."""
    value = rise = 0.0
    for edge, pixel in ((1, 1), (1, -1), (-1, 1), (-1, -1)):
        z = (u + edge * half_width + pixel / 2) / blur
        below = 0.5 * math.erfc(-z / math.sqrt(2))
        sign = edge * pixel
        value += sign * (z * below + math.exp(-0.5 * z * z) / math.sqrt(2 * math.pi)) * blur
        rise += sign * below
    return value, rise
