"""A frame with a spot becomes a sighting: find it, fit it, say what it is worth.

The spot is the image of a pinhole or a narrow beam that comes back: bright, compact, on a ground
that may slope.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np

from readout.model import Pixels, Quality, Return, Sighting, no_sighting
from readout.sighting.compact import Compact, find_compact
from readout.sighting.crosshair import SEARCHED_EVERY
from readout.sighting.spot_fit import SpotFit, first_look, settle, weigh
from readout.sighting.spot_model import Mask, SpotShape
from readout.sighting.spot_window import Picture, suits
from readout.sighting.words import (
    ASTIGMATIC_RATIO,
    AT_EDGE_WIDTHS,
    BLURRED_PX,
    DIM_CONTRAST,
    DIM_SD_PX,
    RIVAL_SHARE,
)

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
LOPSIDED_PX, LOPSIDED_SDS, SURELY_LOPSIDED_SDS = 0.1, 3.0, 4.0
"""core and skirt of a spot may disagree about its place by either of the first two, or the third"""
NEARLY_SATURATED = 0.85
"""a spot lower than this share of the range is not saturated by a hot pixel in it"""


def locate_spot(
    pixels: Pixels,
    *,
    full_scale: float,
    prior: Sighting | None = None,
    unusable: Mask | None = None,
) -> Sighting:
    """The middle of the brightest spot in the frame.

    Of several returns the highest above its ground is the main one; with a ``prior``, the nearest
    to where it was of those that could be. The word ``several_returns`` says that there was a
    choice: something else stands out by a quarter of the spot's height, whatever it is, or the
    spot is lopsided, so that something lies beside it unresolved or a fixed line across it. A spot
    narrower than 1.4 px at half its height is taken for a hot pixel.

    Parameters
    ----------
    pixels : array (height, width), uint8 or uint16, or levels corrected by ``prepare``
        Anything at all may be in it.
    full_scale : float
        Pixels that reach it are saturated and left out.
    prior : Sighting, optional
        The sighting before this one; if no spot is near it, the whole frame is searched, and from
        time to time in any case.
    unusable : array (height, width) of bool, optional
        Pixels to be left out.

    Returns
    -------
    Sighting
        Without arms; further spots in ``others``. Never raises on a bad picture: ``no_image``
        where there is no spot.
    """
    if pixels.ndim != 2 or pixels.size == 0:
        return no_sighting(Quality.NO_IMAGE)
    picture = Picture(pixels, unusable, float(full_scale))
    known = prior if prior is not None and prior.found else None
    if known is not None and not known.others and known.tracked + 1 < SEARCHED_EVERY:
        near = _best(picture, _near(picture, known), known)
        if near is not None:
            return replace(near, tracked=known.tracked + 1)
    return _best(picture, find_compact(pixels), known) or no_sighting(Quality.NO_IMAGE)


@dataclass(frozen=True, slots=True)
class _Candidate:
    """A bright thing, and the others in the frame that could be meant as well."""

    thing: Compact
    rivals: list[Compact]


def _near(picture: Picture, prior: Sighting) -> list[Compact]:
    """Bright things about where the spot was; touches a small part of the frame."""
    height, width = picture.pixels.shape
    column = min(max(round(prior.x_px), 0), width - 1)
    row = min(max(round(prior.y_px), 0), height - 1)
    left, top = max(0, column - FOLLOWED_PX), max(0, row - FOLLOWED_PX)
    part = picture.pixels[top : row + FOLLOWED_PX + 1, left : column + FOLLOWED_PX + 1]
    return [thing.moved(left, top) for thing in find_compact(part)]


def _best(picture: Picture, found: list[Compact], prior: Sighting | None) -> Sighting | None:
    """The first of the things found, highest or nearest first, that proves to be a spot."""
    order = found
    if prior is not None and found:
        # Among those nearly as bright as the highest: a faint thing close by is not the spot.
        equals = [thing for thing in found if thing.height > RIVAL_SHARE * found[0].height]
        order = sorted(
            equals, key=lambda thing: math.hypot(thing.x_px - prior.x_px, thing.y_px - prior.y_px)
        )
    for thing in order[:TRIED]:
        candidate = _candidate(thing, found)
        fit = _fit(picture, candidate)
        if fit is not None:
            return _sighting(picture, fit, candidate, _others(picture, fit, found))
    return None


def _candidate(thing: Compact, found: list[Compact]) -> _Candidate:
    rivals = [
        other for other in found if other is not thing and other.height > RIVAL_SHARE * thing.height
    ]
    return _Candidate(thing, rivals)


def _others(picture: Picture, main: SpotFit, found: list[Compact]) -> tuple[Return, ...]:
    """Further spots, the highest first."""
    others = []
    for thing in [thing for thing in found if not _is_part(thing, main.shape)][:TRIED]:
        fit = _fit(picture, _candidate(thing, found))
        if fit is not None:
            shape = fit.shape
            others.append(Return(shape.x, shape.y, _cov(fit), shape.height / main.shape.height))
    return tuple(sorted(others, key=lambda other: -other.share))


def _fit(picture: Picture, candidate: _Candidate) -> SpotFit | None:
    """Look, cut a window, let the shape settle in it, cut anew if it was not the right one; None
    if it is no spot.
    """
    thing = candidate.thing
    others = [(other.x_px, other.y_px) for other in candidate.rivals]
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
            return fit if fit is not None and _credible(fit, thing, picture) else None
    return None


def _is_part(thing: Compact, shape: SpotShape) -> bool:
    """True for a thing that is the spot itself or a part of it."""
    off = math.hypot(shape.x - thing.x_px, shape.y - thing.y_px)
    return off < 2 * shape.spreads_px[0] + thing.cell_px


def _credible(fit: SpotFit, thing: Compact, picture: Picture) -> bool:
    shape, (height, width) = fit.shape, picture.pixels.shape
    longer, shorter = shape.spreads_px
    return bool(
        np.all(np.isfinite(fit.cov))
        and _is_part(thing, shape)
        and -0.5 <= shape.x <= width - 0.5
        and -0.5 <= shape.y <= height - 0.5
        and fit.explained > LEAST_EXPLAINED
        and fit.left_out < MOST_LEFT_OUT
        and shape.height > LEAST_HEIGHT_SDS * fit.height_sd
        and _largest_sd_px(fit) < LARGEST_SD_PX
        and longer < MOST_ELONGATED * shorter
        and LEAST_WIDTH_PX < shape.width_px < LARGEST_SHARE * min(height, width)
    )


def _largest_sd_px(fit: SpotFit) -> float:
    return math.sqrt(max(fit.cov[0, 0], fit.cov[1, 1]))


def _cov(fit: SpotFit) -> tuple[float, float, float]:
    (xx, xy), (_, yy) = fit.cov.tolist()
    return xx, xy, yy


def _sighting(
    picture: Picture, fit: SpotFit, candidate: _Candidate, others: tuple[Return, ...]
) -> Sighting:
    shape = fit.shape
    half = max(1, round(shape.width_px / 2))
    x, y = round(shape.x), round(shape.y)
    core = picture.pixels[max(0, y - half) : y + half + 1, max(0, x - half) : x + half + 1]
    peak = float(core.max(initial=0))
    quality = Quality.OK
    for word, applies in _words(picture, fit, candidate, peak).items():
        quality |= word if applies else Quality.OK
    return Sighting(shape.x, shape.y, _cov(fit), quality, peak=peak, others=others)


def _words(
    picture: Picture, fit: SpotFit, candidate: _Candidate, peak: float
) -> dict[Quality, bool]:
    shape, (height, width) = fit.shape, picture.pixels.shape
    longer, shorter = shape.spreads_px
    margin = AT_EDGE_WIDTHS * shape.width_px
    inside = margin <= shape.x <= width - 1 - margin and margin <= shape.y <= height - 1 - margin
    top = shape.background + shape.height
    dim = _largest_sd_px(fit) > DIM_SD_PX or shape.height < DIM_CONTRAST * fit.pixel_sd
    return {
        Quality.AT_EDGE: not inside,
        Quality.SATURATED: peak >= picture.ceiling and top > NEARLY_SATURATED * picture.ceiling,
        Quality.DIM: dim,
        Quality.SEVERAL_RETURNS: _lopsided(fit)
        or not all(_is_part(other, shape) for other in candidate.rivals),
        Quality.BLURRED: longer * shape.blur_share > BLURRED_PX,
        Quality.ASTIGMATIC: not dim and longer > ASTIGMATIC_RATIO * shorter,
    }


def _lopsided(fit: SpotFit) -> bool:
    """True if core and skirt disagree about the place: something lies beside or across the spot."""
    far = fit.lopsided_px > LOPSIDED_PX and fit.lopsided_sds > LOPSIDED_SDS
    return far or fit.lopsided_sds > SURELY_LOPSIDED_SDS
