"""A frame with a spot becomes a sighting: find it, fit it, say what it is worth.

The spot is the image of a pinhole or a narrow beam that comes back: bright, compact, on a ground
that may slope.
"""

from __future__ import annotations

import math

import numpy as np

from readout.model import Pixels, Quality, Sighting, no_sighting
from readout.sighting.compact import Compact, find_compact
from readout.sighting.spot_fit import SpotFit, first_look, settle, weigh
from readout.sighting.spot_model import Mask, SpotShape
from readout.sighting.spot_window import Picture, suits

FOLLOWED_PX = 40
"""a spot is looked for this far about where it was last"""
TRIED = 4
CUTS = 4
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
LOPSIDED_PX, LOPSIDED_SDS, SURELY_LOPSIDED_SDS = 0.1, 2.5, 3.5
"""the spot's core and skirt may disagree about its place by either of the first two, or the third"""
ASTIGMATIC_RATIO = 1.5
BLURRED_PX = 40.0
NEARLY_SATURATED = 0.85
"""a spot lower than this share of the range is not saturated by a hot pixel in it"""
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
    else stands out by a fifth of the spot's height or more, whatever it is, or the spot is
    lopsided, so that something lies beside it unresolved or a fixed line across it. A spot narrower
    than 1.4 px at half its height is taken for a hot pixel.

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
    if pixels.ndim != 2 or pixels.size == 0:
        return no_sighting(Quality.NO_IMAGE)
    picture = Picture(pixels, unusable, float(full_scale))
    if prior is not None and prior.found and Quality.SEVERAL_RETURNS not in prior.quality:
        near = _near(picture, prior)
        if near is not None:
            return near
    return _best(picture, find_compact(pixels), prior) or no_sighting(Quality.NO_IMAGE)


def _near(picture: Picture, prior: Sighting) -> Sighting | None:
    """The spot nearest to where it was, if there is one; touches a small part of the frame."""
    height, width = picture.pixels.shape
    column = min(max(round(prior.x_px), 0), width - 1)
    row = min(max(round(prior.y_px), 0), height - 1)
    left, top = max(0, column - FOLLOWED_PX), max(0, row - FOLLOWED_PX)
    part = picture.pixels[top : row + FOLLOWED_PX + 1, left : column + FOLLOWED_PX + 1]
    return _best(picture, [thing.moved(left, top) for thing in find_compact(part)], prior)


def _best(picture: Picture, found: list[Compact], prior: Sighting | None) -> Sighting | None:
    """The first of the things found, highest or nearest first, that proves to be a spot."""
    order = found
    if prior is not None and prior.found and found:
        # Among those as bright as the highest: a faint thing close by is not the spot.
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
        fit = _fit(picture, thing, [(other.x_px, other.y_px) for other in rivals])
        if fit is not None and _credible(fit, picture.pixels.shape):
            alone = all(_is_part(other, fit.shape) for other in rivals)
            return _sighting(picture, fit, alone=alone)
    return None


def _fit(picture: Picture, thing: Compact, others: list[tuple[float, float]]) -> SpotFit | None:
    """Look, cut a window, let the shape settle in it, cut anew if it was not the right one."""
    look = picture.about(thing.x_px, thing.y_px, 6 * thing.cell_px, max(1, thing.cell_px // 2))
    shape = None if look is None else first_look(look)
    for _ in range(CUTS):
        if shape is None or not _is_part(thing, shape):
            return None
        if shape.spreads_px[0] > LARGEST_SHARE * min(picture.pixels.shape):
            return None
        window = picture.around(shape, others)
        settled = None if window is None else settle(window, shape, ceiling=picture.ceiling)
        if window is None or settled is None:
            return None
        enough = suits(window, shape, settled)
        shape = settled
        if enough:
            window = picture.around(shape, others)
            fit = None if window is None else weigh(window, shape, ceiling=picture.ceiling)
            return fit if fit is not None and _is_part(thing, fit.shape) else None
    return None


def _is_part(thing: Compact, shape: SpotShape) -> bool:
    """True for a thing that is the spot itself or a part of it."""
    off = math.hypot(shape.x - thing.x_px, shape.y - thing.y_px)
    return off < 2 * shape.spreads_px[0] + thing.cell_px


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


def _lopsided(fit: SpotFit) -> bool:
    """True if core and skirt disagree about the place: something lies beside or across the spot."""
    far = fit.lopsided_px > LOPSIDED_PX and fit.lopsided_sds > LOPSIDED_SDS
    return far or fit.lopsided_sds > SURELY_LOPSIDED_SDS


def _sighting(picture: Picture, fit: SpotFit, *, alone: bool) -> Sighting:
    shape, pixels = fit.shape, picture.pixels
    alone = alone and not _lopsided(fit)
    width = shape.width_px
    quality = Quality.OK if alone else Quality.SEVERAL_RETURNS
    margin = AT_EDGE_WIDTHS * width
    rows, columns = pixels.shape
    if not (margin <= shape.x <= columns - 1 - margin and margin <= shape.y <= rows - 1 - margin):
        quality |= Quality.AT_EDGE
    half = max(1, round(width / 2))
    x, y = round(shape.x), round(shape.y)
    core = pixels[max(0, y - half) : y + half + 1, max(0, x - half) : x + half + 1]
    clipped = np.count_nonzero(core >= picture.ceiling)
    if clipped and shape.background + shape.height > NEARLY_SATURATED * picture.ceiling:
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
