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
    z = (
        u[None]
        + np.array([1, 1, -1, -1]).reshape(4, *[1] * u.ndim) * half_width
        + np.array([1, -1, 1, -1]).reshape(4, *[1] * u.ndim) * (pixel / 2)
    ) / blur
    below = ndtr(z)
    density = np.exp(-0.5 * z * z) / math.sqrt(2 * math.pi)
    twice = z * below + density
    return Profile(
        value=(twice[0] - twice[1] - twice[2] + twice[3]) * (blur / pixel),
        by_u=(below[0] - below[1] - below[2] + below[3]) / pixel,
        by_half_width=(below[0] - below[1] + below[2] - below[3]) / pixel,
        by_blur=(density[0] - density[1] - density[2] + density[3]) / pixel,
    )


def half_maximum(half_width: float, blur: float) -> tuple[float, float]:
    """Full width at half maximum of the profile, px, and its height in the middle.

    Newton's method on the profile of pixels of width 1: plain numbers, it is asked of every arm.
    """

    def value_and_rise(u: float) -> tuple[float, float]:
        value = rise = 0.0
        for edge, pixel in ((1, 1), (1, -1), (-1, 1), (-1, -1)):
            z = (u + edge * half_width + pixel / 2) / blur
            below = 0.5 * math.erfc(-z / math.sqrt(2))
            sign = edge * pixel
            value += sign * (z * below + math.exp(-0.5 * z * z) / math.sqrt(2 * math.pi)) * blur
            rise += sign * below
        return value, rise

    peak = value_and_rise(0.0)[0]
    u = max(half_width, 1.18 * blur)
    for _ in range(6):
        value, rise = value_and_rise(u)
        if not rise < 0:
            break
        step = (value - peak / 2) / rise
        u -= step
        if abs(step) < 1e-6:
            break
    return 2 * u, peak
