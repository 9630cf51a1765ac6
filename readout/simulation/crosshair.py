"""The image of the reticle on the sensor, before noise.

Two bars cross; their union (light through two slits, or two opaque threads) is blurred by a
Gaussian and integrated over each pixel. What is rendered is

    background + contrast (upright + level - both),

each share being the pixel's mean of a blurred bar, and ``both`` that of the product of the two
blurred cross-sections, bar_u(u) bar_v(v), u and v being the distances from the two middle lines;
where a gap is narrower than the lines, the gap is taken out of either cross-section.

For arms at right angles with one blur this is exactly the blurred union, for the Gaussian
separates along the turned axes u and v. For arms out of square, or of different blur, it is the
definition of the picture: the blurred parallelogram itself would be a bivariate normal integral,
which differs from the product by less than skew / 2 pi of the contrast, in the crossing alone.
The picture is symmetric about the crossing in all cases, so that its place is not in doubt. Every
pixel is exact to 1e-6 of the contrast for a blur of 0.3 px and more.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from readout.model import F64
from readout.simulation.bar import Bar, bar, pixel_means


@dataclass(frozen=True, slots=True)
class Crosshair:
    """The return image: widths and lengths in pixels, levels in electrons (or any unit).

    ``contrast`` is added to ``background`` where an arm is fully bright, negative for a dark arm.
    ``blur_px``: standard deviation of the Gaussian. ``rotation_deg`` positive clockwise on screen.
    ``half_length_px``: an arm reaches this far either side of the crossing (infinite by default).
    ``gap_px``: an arm is missing within this distance of the crossing. ``skew_deg``: extra turn of
    the level arm. The level arm shares ``line_px``, ``blur_px`` and ``contrast`` unless its own are
    given; where the arms cross, the stronger contrast holds.
    """

    line_px: float = 5.0
    blur_px: float = 1.2
    rotation_deg: float = 0.0
    background: float = 800.0
    contrast: float = 7000.0
    half_length_px: float = math.inf
    gap_px: float = 0.0
    skew_deg: float = 0.0
    level_line_px: float | None = None
    level_blur_px: float | None = None
    level_contrast: float | None = None

    def __post_init__(self) -> None:
        widths = (self.line_px, self.blur_px, self.half_length_px)
        own = (width for width in (self.level_line_px, self.level_blur_px) if width is not None)
        if not min(*widths, *own) > 0:
            raise ValueError(f"line width, blur and arm length must be positive, got {self}")
        if not 0 <= self.gap_px < self.half_length_px:
            raise ValueError(f"the gap must be shorter than the arms, got {self}")

    @property
    def upright(self) -> Bar:
        """The upright arm."""
        return Bar(
            self.line_px / 2,
            self.blur_px,
            math.radians(self.rotation_deg),
            self.half_length_px,
            self.gap_px,
        )

    @property
    def level(self) -> Bar:
        """The level arm."""
        return Bar(
            (self.line_px if self.level_line_px is None else self.level_line_px) / 2,
            self.blur_px if self.level_blur_px is None else self.level_blur_px,
            math.radians(self.rotation_deg + self.skew_deg + 90),
            self.half_length_px,
            self.gap_px,
        )

    @property
    def plain(self) -> bool:
        """True for two like arms at right angles, without ends and gap."""
        own = (self.level_line_px, self.level_blur_px, self.level_contrast)
        return self.upright.endless and self.skew_deg == 0 and own == (None, None, None)

    @property
    def contrasts(self) -> tuple[float, float, float]:
        """Of the upright arm, of the level arm, and what is counted twice where they cross."""
        up = self.contrast
        level = up if self.level_contrast is None else self.level_contrast
        return up, level, min(up, level, key=abs)


def crosshair_image(
    shape: tuple[int, int],
    x_px: float,
    y_px: float,
    crosshair: Crosshair,
    *,
    first_row: int = 0,
    first_column: int = 0,
) -> F64:
    """Expected level of each pixel, shape ``shape`` = (height, width).

    ``x_px, y_px``: the crossing, pixel centres at integers. ``first_row, first_column``: the place
    of the rendered rectangle in the whole picture. Only pixels an arm can reach are computed: a
    whole picture costs little more than its arms.
    """
    rows = first_row + np.arange(shape[0], dtype=np.float64) - y_px
    columns = first_column + np.arange(shape[1], dtype=np.float64) - x_px
    return union_image(
        columns,
        rows,
        crosshair.upright,
        crosshair.level,
        background=crosshair.background,
        contrasts=crosshair.contrasts,
    )


def union_image(
    columns: F64,
    rows: F64,
    up: Bar,
    level: Bar,
    *,
    background: float,
    contrasts: tuple[float, float, float],
) -> F64:
    """Two bars on a ground, shape (rows, columns): what ``crosshair_image`` draws, part by part.

    ``columns`` and ``rows``: the sides of the grid of pixel centres, seen from the crossing.
    ``contrasts``: of the upright bar, of the level one, and what is taken off where both are.
    """
    image = np.full((rows.size, columns.size), float(background))
    for contrast, arm in zip(contrasts, (up, level), strict=False):
        row, column = arm.near(columns, rows)
        image[row, column] += contrast * arm.means(columns[column], rows[row])

    row, column = up.near(columns, rows)
    crossed = np.abs(level.across(columns[column], rows[row])) < level.reach_px
    row, column = row[crossed], column[crossed]

    def both_at(x: F64, y: F64) -> F64:
        return _inner(up, up.across(x, y)) * _inner(level, level.across(x, y))

    least_blur_px = min(up.blur_px, level.blur_px)
    both = pixel_means(both_at, columns[column], rows[row], least_blur_px)
    image[row, column] -= contrasts[2] * both
    return image


def _inner(arm: Bar, across: F64) -> F64:
    """Cross-section of an arm without the other one's gap."""
    half = min(arm.half_width_px, arm.half_length_px)
    whole = bar(across, half, arm.blur_px)
    return whole - bar(across, min(arm.gap_px, half), arm.blur_px) if arm.gap_px > 0 else whole
