"""One way in: which method measures which target."""

from __future__ import annotations

from readout.model import Pixels, Sighting, Target
from readout.sighting.crosshair import locate_crosshair
from readout.sighting.prepare import Preparation
from readout.sighting.reticle import Picture
from readout.sighting.spot import locate_spot

AS_THEY_COME = Preparation()


def locate(
    pixels: Pixels,
    *,
    full_scale: int,
    target: Target = Target.CROSSHAIR,
    prior: Sighting | None = None,
    preparation: Preparation = AS_THEY_COME,
) -> Sighting:
    """Position of the return image in one frame.

    Parameters
    ----------
    pixels : array (height, width), uint8 or uint16
        Luminance, anything at all may be in it.
    full_scale : int
        Largest value the sensor can give; pixels that reach it count as saturated.
    target : Target
        What is imaged.
    prior : Sighting, optional
        The sighting before this one: saves the search. If the target is not found there, the
        whole frame is searched.
    preparation : Preparation, optional
        What is known of the camera and of fixed light in its picture.

    Returns
    -------
    Sighting
        In the frame or outside it, with a covariance from what the frame itself shows of its
        noise. Never raises on a bad picture: NaN and a word (``no_image``, ``one_axis``) where
        there is no position, a position and words where there is one to be trusted less.

    Raises
    ------
    BadInput
        If the preparation was made for pictures of another size or depth.
    """
    ready = preparation.prepare(pixels, full_scale)
    before = None if prior is None else preparation.in_prepared(prior)
    match target:
        case Target.CROSSHAIR:
            found = locate_crosshair(
                Picture(ready.levels, ready.full_scale, ready.unusable), before
            )
        case Target.SPOT:
            found = locate_spot(
                ready.levels, full_scale=ready.full_scale, prior=before, unusable=ready.unusable
            )
    return preparation.in_frame(found)
