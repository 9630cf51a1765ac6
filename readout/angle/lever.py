"""Tilts of a lever raised by gauge blocks or a feeler gauge, and what is not known of them.

A bar of length L between two supports, one of them raised by h, tilts by arcsin(h / L) (the sine
bar of the workshop); where L is measured along the ground it is arctan(h / L). A negative height
lies under the other end.

Three things are uncertain. The length is the same in all rows, so its error is a factor common to
all of them. A block used in several rows, under either end, brings the same error each time: it is
shared by these rows. Only how the lever settles on it is new in each row. What is shared is
propagated whole (``both_sides``).
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from enum import StrEnum

import numpy as np

from readout.angle.tilt_set import SharedInput
from readout.errors import BadInput
from readout.model import F64
from readout.units import ARCSEC_PER_RAD


class LeverIs(StrEnum):
    """Along what the lever's length is measured."""

    ON_TWO_SUPPORTS = "on_two_supports"
    """along the bar, from support to support"""
    HORIZONTAL = "horizontal"
    """along the ground"""


@dataclass(frozen=True, slots=True)
class LeverRow:
    """A lever raised: ``axis`` 0 for X, 1 for Y; ``height_sd_mm`` of what was put under it."""

    name: str
    lever_mm: float
    height_mm: float
    height_sd_mm: float
    axis: int


@dataclass(frozen=True, slots=True)
class LeverTilts:
    """``tilt_arcsec`` (n, 2), NaN in the other axis; ``sd_arcsec`` (n,) new in each row."""

    tilt_arcsec: F64
    sd_arcsec: F64
    shared: tuple[SharedInput, ...]


def lever_tilts(
    rows: Sequence[LeverRow],
    *,
    lever_is: LeverIs = LeverIs.ON_TWO_SUPPORTS,
    lever_sd_mm: float = 0.0,
    seating_sd_mm: float = 0.0,
) -> LeverTilts:
    """The tilts of ``rows``.

    ``lever_sd_mm``: of the length, one error common to all rows. ``seating_sd_mm``: of a height,
    new each time the lever is put down. A height that occurs once brings its own error; one that
    occurs in several rows, under either end, brings them the same.

    Raises BadInput, naming the row, for a lever shorter than the height.
    """
    tilt = np.full((len(rows), 2), np.nan)
    by_height, by_length = np.zeros((2, len(rows)))
    axes = np.array([row.axis for row in rows])
    for i, row in enumerate(rows):
        rad, by_height[i], by_length[i] = _tilt(row, lever_is)
        tilt[i, row.axis] = rad * ARCSEC_PER_RAD
    blocks: dict[tuple[float, float], list[int]] = {}
    for i, row in enumerate(rows):
        if row.height_mm != 0:
            blocks.setdefault((abs(row.height_mm), row.height_sd_mm), []).append(i)
    used_again = {key: members for key, members in blocks.items() if len(members) > 1}
    own_sd_mm = np.array([row.height_sd_mm for row in rows])
    own_sd_mm[[i for members in used_again.values() for i in members]] = 0.0
    shared = [
        _shared(
            f"height {height:g} mm, used {len(members)} times",
            axes,
            {i: math.copysign(sd, rows[i].height_mm) * by_height[i] for i in members},
        )
        for (height, sd), members in used_again.items()
        if sd > 0
    ]
    if lever_sd_mm > 0:
        lengths = dict(enumerate(lever_sd_mm * by_length))
        shared.insert(0, _shared("length of the lever", axes, lengths))
    sd = np.hypot(own_sd_mm, seating_sd_mm) * by_height * ARCSEC_PER_RAD
    return LeverTilts(tilt, sd, tuple(shared))


def _shared(name: str, axes: np.ndarray, changes_rad: dict[int, float]) -> SharedInput:
    change = np.zeros((len(axes), 2))
    for row, rad in changes_rad.items():
        change[row, axes[row]] = rad * ARCSEC_PER_RAD
    return SharedInput(name, change)


def _tilt(row: LeverRow, lever_is: LeverIs) -> tuple[float, float, float]:
    """Angle in rad, and its derivatives with height and length, rad/mm."""
    if not row.lever_mm > 0:
        raise BadInput(f"{row.name}: a lever of {row.lever_mm:g} mm cannot be: give its length")
    ratio = row.height_mm / row.lever_mm
    if lever_is is LeverIs.HORIZONTAL:
        rad, by_ratio = math.atan(ratio), 1 / (1 + ratio**2)
    elif abs(ratio) >= 1:
        raise BadInput(
            f"{row.name}: a lever of {row.lever_mm:g} mm cannot be raised by {row.height_mm:g} "
            "mm: it is shorter than the height; check which is which"
        )
    else:
        rad, by_ratio = math.asin(ratio), 1 / math.sqrt(1 - ratio**2)
    return rad, by_ratio / row.lever_mm, -by_ratio * ratio / row.lever_mm
