"""One way in: which method measures which target."""

from __future__ import annotations

from readout.model import Pixels, Sighting, Target
from readout.sighting.crosshair import locate_crosshair


def locate(
    pixels: Pixels,
    *,
    full_scale: int,
    target: Target = Target.CROSSHAIR,
    prior: Sighting | None = None,
) -> Sighting:
    """Position of the return image in one frame.

    Parameters
    ----------
    pixels : array (height, width), uint8 or uint16
        Luminance, anything at all may be in it.
    full_scale : int
        Largest value the sensor can give; pixels that reach it count as saturated.
    target : Target
        What is imaged; only the crosshair so far.
    prior : Sighting, optional
        The sighting before this one: saves the search. If the target is not found there, the
        whole frame is searched.

    Returns
    -------
    Sighting
        In the frame or outside it, with a covariance from noise alone. Never raises on a bad
        picture: NaN and a word (``no_image``, ``one_axis``) where there is no position, a
        position and a word (``dim``, ``saturated``, ``at_edge``) where there is one to be trusted
        less.
    """
    match target:
        case Target.CROSSHAIR:
            return locate_crosshair(pixels, full_scale=full_scale, prior=prior)
