"""What frames are prepared with before the return is looked for in them."""

from __future__ import annotations

from functools import lru_cache
from typing import Protocol

from readout.files.preparation_file import CameraKnowledge
from readout.sighting.prepare import Preparation
from readout.sighting.response import power_response

AS_GIVEN = "as given"


class Preparing(Protocol):
    """Says what is known of the camera that gives pictures of one size and depth.

    It crosses into the process that observes a camera.
    """

    def known_for(self, size_px: tuple[int, int], full_scale: int) -> CameraKnowledge | None:
        """Raises BadInput where what is known was made for other pictures, or cannot be read."""
        ...


class Always:
    """The same for all pictures: ``known``, or, without it, a camera with the tone curve ``gamma``
    of whatever depth.
    """

    def __init__(self, known: CameraKnowledge | None = None, *, gamma: float | None = None) -> None:
        self._known = known
        self._gamma = gamma

    def known_for(self, size_px: tuple[int, int], full_scale: int) -> CameraKnowledge | None:
        """See `Preparing`."""
        if self._known is not None:
            self._known.refuse_unfit(size_px, full_scale)
            return self._known
        return None if self._gamma is None else _curve_alone(self._gamma, full_scale)


@lru_cache(maxsize=8)
def _curve_alone(gamma: float, full_scale: int) -> CameraKnowledge:
    curve = power_response(gamma, full_scale)
    return CameraKnowledge(Preparation(response=curve), full_scale, AS_GIVEN)
