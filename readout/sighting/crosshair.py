"""A frame with a crosshair becomes a sighting: find both arms, fit each, cross them."""

from __future__ import annotations

import math

from readout.model import Arm, Quality, Return, Sighting, no_sighting
from readout.sighting.arm import ArmFit, arm_of, known, shape_of
from readout.sighting.crossing import Cross
from readout.sighting.fold import Line
from readout.sighting.lone_arm import lone_arm
from readout.sighting.reticle import Picture
from readout.sighting.returns import search
from readout.sighting.words import words_of

MOST_WIDENED = 1.5
"""an arm that changes its width by more from one frame to the next is something else"""
SEARCHED_EVERY = 30
"""frames after which a tracked picture is looked over for other returns"""


def locate_crosshair(picture: Picture, prior: Sighting | None = None) -> Sighting:
    """The crossing of the centre lines of the two arms, in the frame or outside it.

    A bright crosshair on a dark ground or a dark one on a bright ground, anywhere, turned by up
    to 45 degrees, its arms not quite square; result as in ``locate``. Of several
    returns the one whose arms are strongest together (longest and brightest) is the main one; while
    tracking, the one that was.
    """
    near = None if prior is None else _from_prior(picture, prior)
    if near is not None and prior is not None:
        if prior.others or prior.tracked + 1 >= SEARCHED_EVERY:
            return _sighting(picture, near, search(picture, near).others)
        return _sighting(picture, near, (), prior.tracked + 1)
    found = search(picture)
    if found.main is not None:
        return _sighting(picture, found.main, found.others)
    if found.upright is not None or found.level is not None:
        return lone_arm(picture.pixels.shape, found.upright, found.level)
    return no_sighting(Quality.NO_IMAGE)


def _from_prior(picture: Picture, prior: Sighting) -> Cross | None:
    """Both arms where the last frame had them, or None if they are not there."""
    if not prior.found or prior.upright is None or prior.level is None:
        return None
    if not (known(prior.upright) and known(prior.level)):
        return None
    upright = Line(prior.x_px, -math.tan(math.radians(prior.upright.angle_deg)), prior.y_px)
    level = Line(prior.y_px, math.tan(math.radians(prior.level.angle_deg)), prior.x_px)
    shapes = shape_of(prior.upright), shape_of(prior.level)
    cross = picture.fit_both(upright, level, *shapes, known=True)
    if cross is None:
        return None
    alike = _alike(cross.upright, prior.upright) and _alike(cross.level, prior.level)
    return cross if alike else None


def _alike(fit: ArmFit, before: Arm) -> bool:
    """True if a fitted arm looks like the one before: of one polarity, and about as wide."""
    wider, thinner = max(fit.width_px, before.width_px), min(fit.width_px, before.width_px)
    return fit.peak_contrast * before.contrast > 0 and wider < MOST_WIDENED * thinner


def _sighting(
    picture: Picture, cross: Cross, others: tuple[Return, ...], tracked: int = 0
) -> Sighting:
    x, y, cov = cross.point()
    return Sighting(
        x,
        y,
        cov,
        words_of(picture.pixels.shape, x, y, cov, cross, others),
        arm_of(cross.upright, -1),
        arm_of(cross.level, 1),
        max(cross.upright.peak, cross.level.peak),
        others,
        tracked,
    )
