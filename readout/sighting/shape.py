"""What an arm looks like across: its shape, as the fit sees it."""

from __future__ import annotations

import math
from dataclasses import dataclass

from readout.model import F64

WIDEST = 60.0
LEAST_BLUR = 0.35
FOURTH = 4
"""place of the half width's fourth power among the parameters of a step"""
AT_BOUND = 1e-3
LEAST_BAR = 0.3
"""least half width of the bar in a profile of spread 1: one thinner looks no different"""


@dataclass(frozen=True, slots=True)
class Beside:
    """A fainter line parallel to the arm: its height relative to the arm's, its distance in px."""

    height: float
    distance: float


@dataclass(frozen=True, slots=True)
class Shape:
    """Background and contrast in levels, gradient in levels per pixel, width and blur in pixels."""

    background: float
    gradient: float
    contrast: float
    half_width: float
    blur: float
    beside: Beside | None = None

    @property
    def fades_px(self) -> float:
        """Distance from the middle at which 0.1 per cent of the line is left."""
        return self.half_width + 3 * self.blur + 0.5

    @property
    def reach_px(self) -> float:
        """Distance from the middle at which the line has faded out."""
        return self.half_width + 4 * self.blur + 1

    @property
    def size_px(self) -> float:
        return max(self.half_width, self.blur)

    @property
    def spread(self) -> float:
        """Second central moment of the profile, px^2."""
        return self.blur**2 + self.half_width**2 / 3

    def changed(self, change: F64) -> Shape:
        """The shape after a step of its parameters, kept within what can be.

        They are, in order: background, gradient, flux (2 half_width contrast), spread, half width
        to the fourth power, and height and distance of a line beside. In these the profile is
        nearly linear: a line thinner than its blur is known by flux and spread alone, and the
        fourth power is how its flatness goes.
        """
        background, gradient, flux, spread, fourth, *beside = change.tolist()
        spread = stepped(self.spread, spread, self.spread / 2, LEAST_BLUR**2 * 1.1, WIDEST**2)
        widest = math.sqrt(3 * (spread - LEAST_BLUR**2))
        half_width = max(self.half_width**4 + fourth, 0.0) ** 0.25
        half_width = min(max(half_width, LEAST_BAR * math.sqrt(spread)), widest)
        return Shape(
            self.background + background,
            self.gradient + gradient,
            (2 * self.half_width * self.contrast + flux) / (2 * half_width),
            half_width,
            math.sqrt(spread - half_width**2 / 3),
            self.beside
            and Beside(
                self.beside.height + beside[0],
                stepped(self.beside.distance, beside[1], 1.0, -2 * WIDEST, 2 * WIDEST),
            ),
        )

    def cannot_follow(self, change: F64) -> bool:
        """True if a step would make the bar thinner or the blur less than can be told apart."""
        thinnest = self.half_width <= LEAST_BAR * math.sqrt(self.spread) * (1 + AT_BOUND)
        sharpest = self.blur <= LEAST_BLUR * (1 + AT_BOUND)
        return (thinnest and change[FOURTH] < 0) or (sharpest and change[FOURTH] > 0)

    def distance_px(self, other: Shape) -> float:
        """How far two profiles are apart, px.

        In width; in fourth moment and flux, relative and in widths; in the place of a line beside.
        """
        width = math.sqrt(other.spread)
        spread = abs(self.spread - other.spread) / (2 * width)
        flatness = abs(self.half_width**4 - other.half_width**4) / (10 * width**3)
        flux = 2 * other.half_width * other.contrast
        share = abs(2 * self.half_width * self.contrast - flux) / max(abs(flux), 1e-300)
        beside = 0.0
        if self.beside is not None and other.beside is not None:
            beside = abs(self.beside.distance - other.beside.distance)
        return max(share * width, spread, flatness, beside)

    def shifted(self, shift: float, change: float) -> float:
        """A shift of the line after a step, px."""
        return stepped(shift, change, 2 * self.size_px, -20 * self.size_px, 20 * self.size_px)


def stepped(value: float, change: float, longest: float, least: float, most: float) -> float:
    """``value`` after a change no longer than ``longest``, kept between the bounds."""
    return min(max(value + min(max(change, -longest), longest), least), most)
