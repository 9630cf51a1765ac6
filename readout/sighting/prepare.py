"""A frame made fit for measuring, before anything is looked for in it.

In this order: empty bits taken away, one colour of a mosaic, the response curve undone, the dark
or the fixed frame subtracted; beside it which pixels to leave out, and where saturation begins
now. What is not set is not done, and a frame for which nothing is set is handed on untouched.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass, replace
from typing import Any, TypeVar

import cv2
import numpy as np
from numpy.typing import NDArray

from readout.errors import BadInput
from readout.model import Arm, Pixels, Return, Sighting
from readout.sighting.dark import mean_frame
from readout.sighting.raw import Plane
from readout.sighting.response import Response

F32 = NDArray[np.float32]
Mask = NDArray[np.bool_]


@dataclass(frozen=True, slots=True)
class Prepared:
    """``levels`` (rows, columns) to measure, ``unusable`` pixels of the same shape or None, and
    the ``full_scale`` from which a level counts as saturated.
    """

    levels: NDArray[Any]
    unusable: Mask | None
    full_scale: float


@dataclass(frozen=True, slots=True)
class Preparation:
    """What is known of a camera and its fixed light. Frames are of the raw frame's shape.

    ``shift``: empty bits below each sample (``depth_of``). ``plane``: the colour to use of a
    mosaic. ``response``: the curve to undo. ``dark``: mean frame with the lamp off. ``fixed``:
    mean frame with the lamp on and the mirror covered, which holds the dark level too and is used
    in its place; both as ``with_dark`` and ``with_fixed`` make them. ``defective``: pixels to
    leave out. ``saturation``: the raw level, shift taken away, at which the sensor clips
    (``saturation_level``), if below full scale.

    Each correction and what it does to noise and rounding:

    - The shift takes away nothing: the bits are empty.
    - A plane of one colour leaves noise and rounding as they are, on half the pixels each way; the
      mean of two greens halves both variances.
    - The response multiplies a pixel's noise and its rounding by the slope of the table; the
      result is float32 and is not rounded again.
    - A subtracted frame adds the 1/n of its n frames' variance, the same in every frame. What was
      subtracted keeps its photon noise, so that the variance there is larger than the light that
      is left tells; levels may be negative.
    """

    shift: int = 0
    plane: Plane | None = None
    response: Response | None = None
    dark: F32 | None = None
    fixed: F32 | None = None
    defective: Mask | None = None
    saturation: int | None = None

    def with_dark(self, frames: Iterable[Pixels]) -> Preparation:
        """With the mean of frames taken with the lamp off; set shift and response before."""
        return replace(self, dark=mean_frame(self._straight(frame) for frame in frames))

    def with_fixed(self, frames: Iterable[Pixels]) -> Preparation:
        """With the mean of frames taken with the lamp on and the mirror covered."""
        return replace(self, fixed=mean_frame(self._straight(frame) for frame in frames))

    def prepare(self, pixels: Pixels, full_scale: int) -> Prepared:
        """The frame corrected; ``full_scale`` is the sensor's largest level, shift taken away.

        Raises BadInput if a frame or mask is of another size than the picture, or the response of
        another depth.
        """
        self._check(pixels, full_scale)
        levels, unusable = self._straight(pixels), self.defective
        saturation = full_scale if self.saturation is None else self.saturation
        top = float(saturation if self.response is None else self.response.table[saturation])
        subtracted = self.dark if self.fixed is None else self.fixed
        saturated = None
        if subtracted is not None or (self.plane is not None and len(self.plane.places) > 1):
            saturated = np.asarray(levels >= top)
        if subtracted is not None:
            levels = cv2.subtract(levels, subtracted, dtype=cv2.CV_32F)
            top -= float(np.median(subtracted[::_SPARSE, ::_SPARSE]))
        if self.plane is not None:
            levels = self.plane.taken_from(levels)
            unusable = None if unusable is None else self.plane.any_of(unusable)
            saturated = None if saturated is None else self.plane.any_of(saturated)
        if saturated is not None and saturated.any():
            levels[saturated] = top
        return Prepared(levels, unusable, top)

    def in_frame(self, sighting: Sighting) -> Sighting:
        """A sighting in the prepared picture as one in pixels of the whole frame."""
        return sighting if self.plane is None else _moved(sighting, self.plane, 2.0)

    def in_prepared(self, sighting: Sighting) -> Sighting:
        """The way back, for the sighting before this one."""
        return sighting if self.plane is None else _moved(sighting, self.plane, 0.5)

    def _straight(self, pixels: Pixels) -> NDArray[Any]:
        """Samples without empty bits, in proportion to the light."""
        samples: Pixels = np.right_shift(pixels, self.shift) if self.shift else pixels
        return samples if self.response is None else self.response.undone(samples)

    def _check(self, pixels: Pixels, full_scale: int) -> None:
        for name, other in (("dark", self.dark), ("fixed", self.fixed), ("defect", self.defective)):
            if other is not None and other.shape != pixels.shape:
                raise BadInput(
                    f"the {name} frame is {_size(other)} and the picture {_size(pixels)}: "
                    "take it anew in this size"
                )
        if self.response is not None and self.response.full_scale != full_scale:
            raise BadInput(
                f"the response curve is for levels up to {self.response.full_scale} and the "
                f"picture goes to {full_scale}: measure it anew in this format"
            )


_SPARSE = 8
_Placed = TypeVar("_Placed", Sighting, Return)


def _size(picture: NDArray[Any]) -> str:
    return f"{picture.shape[1]}x{picture.shape[0]}"


def _moved(sighting: Sighting, plane: Plane, scale: float) -> Sighting:
    """From pixels of a plane to those of the frame (scale 2), or the other way (one half)."""
    forth = scale > 1

    def place(value: float, offset: float) -> float:
        return offset + scale * value if forth else scale * (value - offset)

    def arm(old: Arm | None) -> Arm | None:
        if old is None:
            return None
        return replace(
            old,
            width_px=old.width_px * scale,
            line_px=old.line_px * scale,
            blur_px=old.blur_px * scale,
        )

    def moved(old: _Placed) -> _Placed:
        xx, xy, yy = (value * scale**2 for value in old.cov_px2)
        return replace(
            old,
            x_px=place(old.x_px, plane.x0_px),
            y_px=place(old.y_px, plane.y0_px),
            cov_px2=(xx, xy, yy),
        )

    return replace(
        moved(sighting),
        upright=arm(sighting.upright),
        level=arm(sighting.level),
        others=tuple(moved(other) for other in sighting.others),
    )
