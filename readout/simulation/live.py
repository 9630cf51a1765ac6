"""Frames of a simulated autocollimator, fast enough to run beside everything else.

Only the strips an arm can reach are computed in each frame; the ground around them comes finished
from a bank of noise. In the strips the noise is drawn anew every time, so that means over many
frames behave as with a real sensor where it matters.

Away from the crossing a pixel's value depends only on its distance from the arm: the bar, blurred
and averaged over the pixel turned against it, is tabulated once. In the crossing the mean over a
pixel of the product of two bars is taken as the product of the means. That is exact for upright
arms; turned by a few degrees the difference is of fourth order in the pixel's size, because a
square has no covariance along turned axes.
"""

from __future__ import annotations

import math
from typing import Final

import numpy as np
from numpy.typing import NDArray

from readout.model import Pixels
from readout.simulation.autocollimator import Autocollimator
from readout.simulation.bar import HALF_DIAGONAL_PX, bar, pixel_nodes
from readout.simulation.sensor import F32, NoiseBank

TABLE_STEPS_PER_PX: Final = 64
STRIP_SIGMAS: Final = 4.5
"""A strip ends where the arm has fallen to 3e-6 of its contrast."""


class LiveRenderer:
    """Renders frames of one instrument; deterministic for the generators given.

    Raises ValueError for a crosshair that is not plain (unlike arms, a gap, ends, out of square)
    or turned by more than 45°.
    """

    def __init__(self, autocollimator: Autocollimator, rng: np.random.Generator) -> None:
        picture, sensor = autocollimator.picture_of_reticle, autocollimator.sensor
        if not picture.plain or abs(picture.rotation_deg) > 45:
            raise ValueError(
                "live frames have plain arms across the picture, turned by 45° at most"
            )
        self._sensor = sensor
        self._height, self._width = autocollimator.shape
        self._ground = NoiseBank.normal(autocollimator.shape, rng).digitised(
            picture.background, sensor
        )
        turn = math.radians(picture.rotation_deg)
        self._cos, self._sin = math.cos(turn), math.sin(turn)
        self._reach_px = picture.line_px / 2 + STRIP_SIGMAS * picture.blur_px + HALF_DIAGONAL_PX
        self._strip_px = 2 * math.ceil(self._reach_px / self._cos) + 1
        # one pixel more on either side: a strip begins up to one pixel before the arm's reach
        self._table_from_px = -self._cos * (self._strip_px // 2 + 2)
        steps = math.ceil(-2 * self._table_from_px * TABLE_STEPS_PER_PX) + 2
        u = self._table_from_px + np.arange(steps) / TABLE_STEPS_PER_PX
        profile = sum(
            weight * bar(u + self._cos * dx + self._sin * dy, picture.line_px / 2, picture.blur_px)
            for dx, dy, weight in pixel_nodes(6)
        )
        self._profile: F32 = np.asarray(profile, dtype=np.float32)
        self._profile_step: F32 = np.append(np.diff(self._profile), np.float32(0))
        gain = sensor.gain_levels_per_electron
        self._ground_level = np.float32(sensor.mean_levels(picture.background))
        self._ground_var = np.float32(sensor.noise_var_levels2(picture.background))
        self._contrast_level = np.float32(gain * picture.contrast)
        self._contrast_var = np.float32(gain**2 * picture.contrast)

    def frame(self, x_px: float, y_px: float, rng: np.random.Generator) -> Pixels:
        """A new picture with the crossing at (x_px, y_px), in the frame or not."""
        frame: Pixels = self._ground.take(rng).copy()
        tan = self._sin / self._cos
        rows, columns = np.arange(self._height), np.arange(self._width)
        self._draw_arm(frame, x_px - (rows - y_px) * tan, x_px, y_px, -self._sin, rng)
        self._draw_arm(frame.T, y_px + (columns - x_px) * tan, y_px, x_px, self._sin, rng)
        return frame

    def _draw_arm(
        self,
        picture: Pixels,
        middle_px: NDArray[np.floating],
        across_px: float,
        along_px: float,
        other_sin: float,
        rng: np.random.Generator,
    ) -> None:
        """Draw the arm that crosses line i of ``picture`` at ``middle_px[i]``.

        ``across_px, along_px``: the crossing, within a line and from line to line. ``other_sin``:
        how far the other arm leaves its line per pixel, as a sine.
        """
        n, lines, size = self._strip_px, picture.shape[0], picture.shape[1]
        first = np.floor(middle_px).astype(np.int64) - n // 2
        start = (self._cos * (first - middle_px) - self._table_from_px) * TABLE_STEPS_PER_PX
        step = np.arange(n) * (self._cos * TABLE_STEPS_PER_PX)
        share = self._at(start.astype(np.float32)[:, None] + step.astype(np.float32))

        half_span = (self._reach_px + abs(other_sin) * (n + 1)) / self._cos
        begin = min(max(math.floor(along_px - half_span), 0), lines)
        end = min(max(math.ceil(along_px + half_span) + 1, begin), lines)
        if end > begin:
            line = np.arange(begin, end)[:, None] - along_px
            offset = first[begin:end, None] + np.arange(n) - across_px
            v = self._cos * line + other_sin * offset
            place = np.clip(
                (v - self._table_from_px) * TABLE_STEPS_PER_PX, 0, self._profile.size - 1
            )
            other = self._at(place.astype(np.float32))
            share[begin:end] += other * (1 - share[begin:end])

        noise = rng.standard_normal(share.shape, dtype=np.float32)
        noise *= np.sqrt(self._contrast_var * share + self._ground_var)
        noise += self._contrast_level * share
        noise += self._ground_level
        drawn = self._sensor.quantise(noise)
        place_in_line = first[:, None] + np.arange(n)
        line_number = np.broadcast_to(np.arange(lines)[:, None], share.shape)
        if first.min() < 0 or first.max() + n > size:
            inside = (place_in_line >= 0) & (place_in_line < size)
            picture[line_number[inside], place_in_line[inside]] = drawn[inside]
        else:
            picture[line_number, place_in_line] = drawn

    def _at(self, place: F32) -> F32:
        """Profile at a place in the table, linearly between its entries."""
        index = place.astype(np.int32)
        share: F32 = (
            self._profile[index] + (place - index.astype(np.float32)) * self._profile_step[index]
        )
        return share
