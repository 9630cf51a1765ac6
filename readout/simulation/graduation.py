"""A graduated scale in the picture: marks at equal steps of slope, at any turn, with known truth.

The scale is ruled evenly in the focal plane. A calibration says which slope belongs to which
pixel; mark n is where the slope along the scale is n divisions, so that the turn of the camera,
its mirror images and the distortion of its lens are in the picture as they are in the calibration.
The bars are blurred by a Gaussian and integrated over each pixel by a product rule.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from readout.angle.calibration import Calibration
from readout.model import F64
from readout.simulation.bar import LEAST_BLUR_PX, bar, pixel_means


@dataclass(frozen=True, slots=True)
class Ruling:
    """One scale: marks from ``first`` to ``last``, but for those in ``missing``.

    ``division_slope``: step of the beam's slope from mark to mark. Lengths along the marks are in
    divisions: every ``long_every``-th reaches ``long_div`` either side of the scale's axis, the
    others ``short_div``; ``one_sided``: to one side only. ``at_div``: where the axis lies, in
    divisions from the optical axis; ``phase_div``: where mark 0 lies along it. ``line_px`` and
    ``blur_px``: width of a mark and standard deviation of the Gaussian. ``axis_line``: a line
    along the scale.
    """

    division_slope: float
    first: int = -20
    last: int = 20
    missing: tuple[int, ...] = ()
    long_every: int = 5
    short_div: float = 0.3
    long_div: float = 0.6
    one_sided: bool = False
    at_div: float = 0.0
    phase_div: float = 0.0
    line_px: float = 2.0
    blur_px: float = 1.0
    axis_line: bool = True

    def __post_init__(self) -> None:
        if not (self.division_slope > 0 and self.line_px > 0 and self.blur_px >= LEAST_BLUR_PX):
            raise ValueError(f"division, line and blur must be positive, got {self}")

    def marks(self) -> list[int]:
        """Numbers of the marks that are there."""
        return [n for n in range(self.first, self.last + 1) if n not in self.missing]


def ruled_share(
    shape: tuple[int, int], calibration: Calibration, ruling: Ruling, *, upright: bool = False
) -> F64:
    """Share of full cover of every pixel by the scale, shape ``shape`` = (height, width).

    An engraved scale takes light away where it covers (multiply by 1 - share), a lit one adds some.
    ``upright``: the scale of the Y slope.
    """
    division_px = ruling.division_slope * calibration.focal_length_px
    blur = ruling.blur_px / division_px
    half = ruling.line_px / 2 / division_px
    there = np.isin(np.arange(ruling.first - 1, ruling.last + 2), ruling.marks())

    def along_and_across(x: F64, y: F64) -> tuple[F64, F64]:
        w_x, w_y = calibration.slopes(x, y)
        along, across = (w_y, w_x) if upright else (w_x, w_y)
        return (
            along / ruling.division_slope - ruling.phase_div,
            across / ruling.division_slope - ruling.at_div,
        )

    def share_at(x: F64, y: F64) -> F64:
        along, across = along_and_across(x, y)
        number = np.clip(np.rint(along), ruling.first - 1, ruling.last + 1).astype(np.intp)
        length = np.where(number % ruling.long_every == 0, ruling.long_div, ruling.short_div)
        middle = length / 2 if ruling.one_sided else 0.0
        reach = length / 2 if ruling.one_sided else length
        mark = bar(along - number, half, blur) * bar(across - middle, reach, blur)
        mark = mark * there[number - ruling.first + 1]
        if not ruling.axis_line:
            return np.asarray(mark)
        centre, long = (ruling.first + ruling.last) / 2, (ruling.last - ruling.first) / 2
        line = bar(across, half, blur) * bar(along - centre, long + half, blur)
        return np.asarray(1 - (1 - mark) * (1 - line))

    rows, columns = np.indices(shape, dtype=np.float64)
    along, across = along_and_across(columns, rows)
    margin = 8 * blur + half + 2 / division_px
    near = np.abs(across) < ruling.long_div + margin
    near &= (along > ruling.first - margin) & (along < ruling.last + margin)
    share = np.zeros(shape)
    share[near] = pixel_means(share_at, columns[near], rows[near], ruling.blur_px)
    return share
