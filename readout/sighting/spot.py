"""A frame with a spot becomes a sighting: find it, fit it, say what it is worth.

The spot is the image of a pinhole or a narrow beam that comes back: bright, compact, on a ground
that may slope.
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from readout.model import Pixels, Quality, Sighting, no_sighting
from readout.sighting.compact import Compact, find_compact
from readout.sighting.spot_fit import SpotFit, first_look, fit_spot, settle
from readout.sighting.spot_model import Mask, SpotShape, Window

REACH_SPREADS = 5.5
"""half the side of the window, in standard deviations of the light: the ground's slope takes 2 %
of the knowledge of the place there, and 8 % at four"""
LEAST_REACH_PX = 7
MOST_CELLS_A_SIDE = 80
CELLS_A_BLUR = 1.6
"""pixels are averaged while the blur stays this many cells wide: it costs 1 % of the sd"""
FOLLOWED_PX = 48
"""a spot is looked for this far about where it was last"""
TRIED = 4
LEAST_EXPLAINED = 0.85
"""share of the structure in its window that a spot must explain, else it is something else"""
MOST_LEFT_OUT = 0.25
LARGEST_SD_PX = 0.5
"""a position less certain than this is none"""
LEAST_HEIGHT_SDS = 8.0
LEAST_WIDTH_PX = 1.4
"""anything narrower is a hot pixel: no lens and pixel give less"""
LARGEST_SHARE = 0.35
"""of the frame's shorter side: what is wider is a field, not a spot"""
MOST_ELONGATED = 3.0
RIVAL_SHARE = 0.2
"""another bright thing this high beside the spot makes it one of several returns"""
ASTIGMATIC_RATIO = 1.5
BLURRED_PX = 40.0
DIM_CONTRAST = 3.0
"""a spot less than this many pixel noises high is called dim"""
AT_EDGE_WIDTHS = 2.0


def locate_spot(
    pixels: Pixels,
    *,
    full_scale: float,
    prior: Sighting | None = None,
    unusable: Mask | None = None,
) -> Sighting:
    """The middle of the brightest spot in the frame.

    Of several returns the highest above its ground is the main one; with a ``prior``, the one
    nearest to where it was. The word ``several_returns`` says that there was a choice: something
    else stands out by a fifth of the spot's height or more, whatever it is.

    Parameters
    ----------
    pixels : array (height, width), uint8 or uint16, or levels corrected by ``prepare``
        Anything at all may be in it.
    full_scale : float
        Pixels that reach it are saturated and left out.
    prior : Sighting, optional
        The sighting before this one; if no spot is near it, the whole frame is searched.
    unusable : array (height, width) of bool, optional
        Pixels to be left out.

    Returns
    -------
    Sighting
        Without arms. Never raises on a bad picture: ``no_image`` where there is no spot.
    """
    if pixels.ndim != 2 or min(pixels.shape) < LEAST_REACH_PX:
        return no_sighting(Quality.NO_IMAGE)
    if prior is not None and prior.found and Quality.SEVERAL_RETURNS not in prior.quality:
        near = _near(pixels, full_scale, prior, unusable)
        if near is not None:
            return near
    found = find_compact(pixels)
    return _best(pixels, full_scale, found, unusable, prior) or no_sighting(Quality.NO_IMAGE)


def _near(
    pixels: Pixels, full_scale: float, prior: Sighting, unusable: Mask | None
) -> Sighting | None:
    """The spot nearest to where it was, if there is one; touches a small part of the frame."""
    height, width = pixels.shape
    column = min(max(round(prior.x_px), 0), width - 1)
    row = min(max(round(prior.y_px), 0), height - 1)
    left, top = max(0, column - FOLLOWED_PX), max(0, row - FOLLOWED_PX)
    part = pixels[top : row + FOLLOWED_PX + 1, left : column + FOLLOWED_PX + 1]
    found = [thing.moved(left, top) for thing in find_compact(part)]
    return _best(pixels, full_scale, found, unusable, prior)


def _best(
    pixels: Pixels,
    full_scale: float,
    found: list[Compact],
    unusable: Mask | None,
    prior: Sighting | None,
) -> Sighting | None:
    """The first of the things found, highest or nearest first, that proves to be a spot."""
    order = found
    if prior is not None and prior.found and found:
        # As bright as the rivals it was chosen among: a faint thing close by is not the spot.
        equals = [thing for thing in found if thing.height > RIVAL_SHARE * found[0].height]
        order = sorted(
            equals, key=lambda thing: math.hypot(thing.x_px - prior.x_px, thing.y_px - prior.y_px)
        )
    for thing in order[:TRIED]:
        rivals = [
            other
            for other in found
            if other is not thing and other.height > RIVAL_SHARE * thing.height
        ]
        fit = _fit(pixels, full_scale, thing, rivals, unusable)
        if fit is not None and _credible(fit, pixels.shape):
            alone = all(_within(fit.shape, other) for other in rivals)
            return _sighting(pixels, full_scale, fit, alone=alone)
    return None


def _fit(
    pixels: Pixels,
    full_scale: float,
    thing: Compact,
    others: list[Compact],
    unusable: Mask | None,
) -> SpotFit | None:
    """A rough fit in a rough window, then the fit in a window cut to its size."""
    cell = max(1, thing.cell_px // 2)
    reach = max(LEAST_REACH_PX, 6 * thing.cell_px)
    window = _cut(pixels, thing.x_px, thing.y_px, reach, cell, full_scale, others, unusable)
    shape = None if window is None else first_look(window)
    rough = None if window is None or shape is None else settle(window, shape, ceiling=full_scale)
    if rough is None or not _near_enough(rough, thing):
        return None
    reach = max(LEAST_REACH_PX, math.ceil(REACH_SPREADS * rough.spreads_px[0]) + 1)
    if reach > LARGEST_SHARE * 3 * min(pixels.shape):
        return None
    cell = max(
        1,
        int(rough.spreads_px[1] * rough.blur_share / CELLS_A_BLUR),
        2 * reach // MOST_CELLS_A_SIDE,
    )
    window = _cut(pixels, rough.x, rough.y, reach, cell, full_scale, others, unusable)
    fit = None if window is None else fit_spot(window, rough, ceiling=full_scale)
    return fit if fit is not None and _near_enough(fit.shape, thing) else None


def _near_enough(shape: SpotShape, thing: Compact) -> bool:
    off = math.hypot(shape.x - thing.x_px, shape.y - thing.y_px)
    return off < 4 * thing.cell_px + shape.spreads_px[0]


def _within(shape: SpotShape, thing: Compact) -> bool:
    """True for a thing that is part of the spot."""
    return (
        math.hypot(shape.x - thing.x_px, shape.y - thing.y_px) < shape.spreads_px[0] + thing.cell_px
    )


def _cut(
    pixels: Pixels,
    x_px: float,
    y_px: float,
    reach: int,
    cell: int,
    full_scale: float,
    others: list[Compact],
    unusable: Mask | None,
) -> Window | None:
    """A square about a spot, without what is saturated, defective or nearer to another spot."""
    side = (2 * reach + 1) // cell
    rows = _span(y_px, side * cell, pixels.shape[0], cell)
    columns = _span(x_px, side * cell, pixels.shape[1], cell)
    part = pixels[rows, columns]
    if part.size == 0:
        return None
    bad = np.asarray(part >= full_scale)
    if unusable is not None:
        bad = bad | unusable[rows, columns]
    levels = part.astype(np.float64)
    if cell > 1:
        levels, bad = _averaged(levels, cell), _averaged(bad.astype(np.float64), cell) > 0
    x0 = columns.start + (cell - 1) / 2
    y0 = rows.start + (cell - 1) / 2
    usable = ~bad
    for other in others:
        to_x, to_y = other.x_px - x_px, other.y_px - y_px
        if math.hypot(to_x, to_y) < 3 * reach:
            x = x0 + cell * np.arange(usable.shape[1]) - (x_px + other.x_px) / 2
            y = y0 + cell * np.arange(usable.shape[0]) - (y_px + other.y_px) / 2
            nearer = x[None, :] * to_x + y[:, None] * to_y
            usable &= nearer < 0
    return Window(levels, usable, x0, y0, cell)


def _span(middle: float, length: int, size: int, cell: int) -> slice:
    first = max(0, round(middle - length / 2 + 0.5))
    last = min(size, round(middle + length / 2 + 0.5))
    return slice(first, first + max(0, last - first) // cell * cell)


def _averaged(values: NDArray[np.float64], cell: int) -> NDArray[np.float64]:
    rows, columns = values.shape[0] // cell, values.shape[1] // cell
    return np.asarray(values.reshape(rows, cell, columns, cell).mean(axis=(1, 3)))


def _credible(fit: SpotFit, frame: tuple[int, ...]) -> bool:
    shape = fit.shape
    longer, shorter = shape.spreads_px
    return bool(
        np.all(np.isfinite(fit.cov))
        and -0.5 <= shape.x <= frame[1] - 0.5
        and -0.5 <= shape.y <= frame[0] - 0.5
        and fit.explained > LEAST_EXPLAINED
        and fit.left_out < MOST_LEFT_OUT
        and shape.height > LEAST_HEIGHT_SDS * fit.height_sd
        and math.sqrt(max(fit.cov[0, 0], fit.cov[1, 1])) < LARGEST_SD_PX
        and longer < MOST_ELONGATED * shorter
        and LEAST_WIDTH_PX < shape.width_px < LARGEST_SHARE * min(frame)
    )


def _sighting(pixels: Pixels, full_scale: float, fit: SpotFit, *, alone: bool) -> Sighting:
    shape = fit.shape
    width = shape.width_px
    quality = Quality.OK if alone else Quality.SEVERAL_RETURNS
    margin = AT_EDGE_WIDTHS * width
    rows, columns = pixels.shape
    if not (margin <= shape.x <= columns - 1 - margin and margin <= shape.y <= rows - 1 - margin):
        quality |= Quality.AT_EDGE
    half = max(1, round(width / 2))
    x, y = round(shape.x), round(shape.y)
    core = pixels[max(0, y - half) : y + half + 1, max(0, x - half) : x + half + 1]
    if np.any(core >= full_scale):
        quality |= Quality.SATURATED
    if shape.height < DIM_CONTRAST * fit.pixel_sd:
        quality |= Quality.DIM
    if width > BLURRED_PX:
        quality |= Quality.BLURRED
    longer, shorter = shape.spreads_px
    if longer > ASTIGMATIC_RATIO * shorter:
        quality |= Quality.ASTIGMATIC
    (xx, xy), (_, yy) = fit.cov
    return Sighting(
        shape.x,
        shape.y,
        (float(xx), float(xy), float(yy)),
        quality,
        peak=float(core.max(initial=0)),
    )
