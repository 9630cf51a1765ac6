"""What a spot looks like on the pixels: its shape, the level it gives each pixel, and how both
change with its parameters.

Level of a pixel at (x, y), with d = (x - x0, y - y0):

    b + g d + A D(sqrt(d^T S^-1 d); h),    S = T / (1 + h^2 / 4)

background b and its two slopes g, height A, the middle (x0, y0), the light's second moments T (an
ellipse with any turn) and the radius h of the disc in units of the blur S, inside the profile D.
How wide the light is and how sharp its edge is are so two separate questions.

The mean over a pixel is a Gaussian blur of 1/12 px^2 up to the fourth order, and T absorbs it. The
remainder is a symmetric change of the profile: by itself it moves nothing, and at a blur of 0.7 px
its beat with the pixels stays below 0.0001 px.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from readout.model import F64, QUANTISATION_VAR
from readout.sighting.disc import DiscProfile, disc_profile, half_maximum

Mask = NDArray[np.bool_]

LEAST_SPREAD_PX = 0.3
LEAST_EDGE, MOST_EDGE = 0.3, 20.0
PARAMETERS = 10
MIDDLE = slice(4, 6)
"""where the middle stands among the parameters: b, g (2), A, (x0, y0), S (xx, xy, yy), h"""
HEIGHT = 3
PATCH_WIDTHS = 0.8
"""side of the patches, in widths of the spot: foreign light of about its own size is seen best"""
WIDTH_OF_SPREAD = 2.355


@dataclass(frozen=True, slots=True)
class SpotShape:
    """A spot in pixels and levels; ``moments`` is T as (xx, xy, yy), ``edge`` the radius h."""

    x: float
    y: float
    background: float
    slope_x: float
    slope_y: float
    height: float
    moments: tuple[float, float, float]
    edge: float

    @property
    def spreads_px(self) -> tuple[float, float]:
        """Standard deviations of the light along its longer and its shorter axis."""
        xx, xy, yy = self.moments
        mean, half = (xx + yy) / 2, math.hypot((xx - yy) / 2, xy)
        return math.sqrt(mean + half), math.sqrt(max(mean - half, 0.0))

    @property
    def blur_share(self) -> float:
        """The blur as a share of the spread."""
        return 1 / math.sqrt(1 + self.edge**2 / 4)

    @property
    def width_px(self) -> float:
        """Full width at half maximum, the geometric mean of the two axes."""
        longer, shorter = self.spreads_px
        return 2 * half_maximum(self.edge) * self.blur_share * math.sqrt(longer * shorter)


@dataclass(frozen=True, slots=True)
class Window:
    """Pixels about a spot, averaged ``cell`` by ``cell``; ``x0, y0`` is the middle of the first.

    ``usable`` leaves out what is defective, saturated or nearer to something else.
    """

    levels: F64
    usable: Mask
    x0: float
    y0: float
    cell: int

    def in_cells(self, shape: SpotShape) -> SpotShape:
        """A shape in pixels of the picture as one in cells from the first one."""
        moved = replace(shape, x=shape.x - self.x0, y=shape.y - self.y0)
        return _scaled(moved, 1 / self.cell)

    def in_pixels(self, shape: SpotShape) -> SpotShape:
        """The way back."""
        scaled = _scaled(shape, self.cell)
        return replace(scaled, x=scaled.x + self.x0, y=scaled.y + self.y0)


def _scaled(shape: SpotShape, factor: float) -> SpotShape:
    xx, xy, yy = shape.moments
    return replace(
        shape,
        x=shape.x * factor,
        y=shape.y * factor,
        slope_x=shape.slope_x / factor,
        slope_y=shape.slope_y / factor,
        moments=(xx * factor**2, xy * factor**2, yy * factor**2),
    )


@dataclass(frozen=True, slots=True)
class Columns:
    """The usable pixels of a window, places in cells.

    ``patch`` numbers squares of them, ``usable`` is the window's.
    """

    x: F64
    y: F64
    level: F64
    patch: NDArray[np.intp]
    usable: Mask
    least_variance: float

    def on_grid(self, values: F64) -> F64:
        """Values (..., n) back on the window (..., rows, columns), 0 where a pixel is left out."""
        shape = (*values.shape[:-1], *self.usable.shape)
        if self.x.size == self.usable.size:
            return values.reshape(shape)
        grid = np.zeros(shape)
        grid[..., self.usable] = values
        return grid


STEPS = {1.0: ((0, 1), (1, 0)), 2.0: ((1, 1), (1, -1)), 4.0: ((0, 2), (2, 0))}
"""steps down and right to the neighbours of a pixel, by their distance squared"""


def columns_of(window: Window, shape: SpotShape) -> Columns:
    """A window's usable pixels, in patches as large as the spot (in cells) is wide."""
    row, column = np.nonzero(window.usable)
    side = max(2, round(PATCH_WIDTHS * WIDTH_OF_SPREAD * shape.spreads_px[0]))
    across = -(-window.usable.shape[1] // side)
    return Columns(
        column.astype(np.float64),
        row.astype(np.float64),
        window.levels[row, column],
        (row // side) * across + column // side,
        window.usable,
        QUANTISATION_VAR / window.cell**2,
    )


@dataclass(frozen=True, slots=True)
class State:
    """What a shape gives at n pixels: light above the ground, level, what is left; (10, n)."""

    light: F64
    model: F64
    residual: F64
    jacobian: F64


def state_of(columns: Columns, shape: SpotShape) -> State:
    """Model and derivatives of a shape in cells."""
    return _state(columns, shape, *_profile(columns, shape))


def best_state_of(columns: Columns, shape: SpotShape) -> tuple[SpotShape, State]:
    """The same with the ground, its slopes and the height that fit best (variable projection;
    G. H. Golub and V. Pereyra, SIAM J. Numer. Anal. 10 (1973) 413).
    """
    profile, dx, dy, qx, qy = _profile(columns, shape)
    design = np.stack([np.ones_like(dx), dx, dy, profile.value])
    normal = design @ design.T
    normal.flat[::5] *= 1 + 1e-9
    background, slope_x, slope_y, height = np.linalg.solve(normal, design @ columns.level).tolist()
    shape = replace(shape, background=background, slope_x=slope_x, slope_y=slope_y, height=height)
    return shape, _state(columns, shape, profile, dx, dy, qx, qy)


def _profile(columns: Columns, shape: SpotShape) -> tuple[DiscProfile, F64, F64, F64, F64]:
    """The profile at the pixels, d, and S^-1 d."""
    dx, dy = columns.x - shape.x, columns.y - shape.y
    xx, xy, yy = (moment * shape.blur_share**2 for moment in shape.moments)
    determinant = xx * yy - xy * xy
    qx, qy = (yy * dx - xy * dy) / determinant, (xx * dy - xy * dx) / determinant
    return disc_profile(np.sqrt(dx * qx + dy * qy), shape.edge), dx, dy, qx, qy


def _state(
    columns: Columns, shape: SpotShape, profile: DiscProfile, dx: F64, dy: F64, qx: F64, qy: F64
) -> State:
    pull = -shape.height * profile.by_r_over_r
    pull_x, pull_y = pull * qx, pull * qy
    light = shape.height * profile.value
    model = shape.background + shape.slope_x * dx + shape.slope_y * dy + light
    share2 = shape.blur_share**2
    by_xx, by_xy, by_yy = (
        0.5 * share2 * pull_x * qx,
        share2 * pull_x * qy,
        0.5 * share2 * pull_y * qy,
    )
    xx, xy, yy = shape.moments
    narrowing = 0.5 * shape.edge * share2 * (xx * by_xx + xy * by_xy + yy * by_yy)
    jacobian = np.empty((PARAMETERS, dx.size))
    jacobian[0] = 1.0
    jacobian[1:4] = dx, dy, profile.value
    jacobian[MIDDLE] = pull_x - shape.slope_x, pull_y - shape.slope_y
    jacobian[6:9] = by_xx, by_xy, by_yy
    jacobian[9] = shape.height * profile.by_edge - narrowing
    return State(light, model, columns.level - model, jacobian)


def stepped(shape: SpotShape, change: F64) -> tuple[SpotShape, float]:
    """The shape after a step held within reason, and how far the step went, in widths."""
    by = change.tolist()
    longer, shorter = shape.spreads_px
    far = math.hypot(by[4], by[5])
    middle = min(1.0, longer / far) if far > 0 else 1.0
    widening = math.hypot(by[6] + by[8], by[6] - by[8], 2 * by[7])
    grown = min(1.0, 0.7 * shorter**2 / widening) if widening > 0 else 1.0
    xx, xy, yy = (now + grown * more for now, more in zip(shape.moments, by[6:9], strict=True))
    longest = 0.5 + shape.edge / 2
    edge = shape.edge + min(max(by[9], -longest), longest)
    edge = min(max(edge, LEAST_EDGE), MOST_EDGE)
    stepped_shape = SpotShape(
        shape.x + middle * by[4],
        shape.y + middle * by[5],
        shape.background + by[0],
        shape.slope_x + by[1],
        shape.slope_y + by[2],
        shape.height + by[HEIGHT],
        held(xx, xy, yy),
        edge,
    )
    sharpening = abs(stepped_shape.blur_share / shape.blur_share - 1)
    return stepped_shape, max(far / longer, widening / (2 * shorter * longer), sharpening)


def held(xx: float, xy: float, yy: float) -> tuple[float, float, float]:
    """Moments no narrower than a pixel shows."""
    least = LEAST_SPREAD_PX**2
    if (xx + yy) / 2 - math.hypot((xx - yy) / 2, xy) >= least:
        return xx, xy, yy
    return max(xx, least), 0.0, max(yy, least)
