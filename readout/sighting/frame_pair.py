"""What two frames of one scene say about noise: where nothing moved, sorted by level.

Half the mean square of the difference of two frames is the temporal variance of a pixel; whatever
is the same in both, pattern and scene, drops out (European Machine Vision Association, Standard
1288, release 4.0 Linear, 2021; J. R. Janesick, Photon Transfer, SPIE 2007, chapter 5). In one pair
of a structured scene the pixels themselves are the steps of light, if three things are minded:

- *Sorting by level.* Pixels sorted by their own mean are sorted by their noise too, which flattens
  the law. They are sorted by the mean of their eight neighbours instead: grouping by an instrument
  that knows nothing of the pixel's own noise (A. Wald, Ann. Math. Stat. 11 (1940) 284).
- *A scene that moved.* A displacement s changes a pixel by s times the slope of the scene, to first
  order (B. D. Lucas and T. Kanade, Proc. IJCAI (1981) 674). It is fitted in a window about each
  pixel and taken out, with the freedom it takes. Pixels it changed by more than a third of their
  noise are left out, as are those about which the neighbours' mean difference is no noise: there
  the scene changed by more than a first order can say. Neither choice looks at the noise of the
  pixel itself.
- *Light that flickered*, evenly or in bands: a straight line of the difference over the level and
  a wide local mean are taken out.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import cv2
import numpy as np
from numpy.typing import NDArray

from readout.model import F64, QUANTISATION_VAR, Pixels

F32 = NDArray[np.float32]

BINS: Final = 256
"""levels the scale is divided into"""
BLOCKS: Final = 41
"""groups of tiles; a prime, so that no arm of a crosshair falls into few of them"""
TILE_PX: Final = 16
"""tile kept together: noise that goes from pixel to pixel, as in a JPEG block, stays in one"""
WINDOW_PX: Final = 65
"""side of the window in which the scene moves as a whole"""
BAND_PX: Final = 33
"""side of the square over which light is the same but for noise"""
SMOOTHED_PX: Final = 1.0
LARGEST_MOVE_SD: Final = 0.3
"""a pixel changed by the movement by more of its noise than this is left out"""
LARGEST_LEVERAGE: Final = 0.02
"""of a pixel on the movement fitted: with more, its own noise would be taken for movement"""
CHANGED: Final = 5.0
"""neighbours' mean differences this many of their usual spread are no noise"""
NEAR_PX: Final = 13
"""side of the square about a change that is left out with it"""
LOOKS: Final = 10
LEAST_NEWS: Final = 0.0005
LEAST_TOGETHER: Final = 200
OUTLYING: Final = 5.0
"""differences this many sd are a blinking pixel, not noise"""


@dataclass(frozen=True, slots=True)
class Tally:
    """Sums over the pixels of frame pairs, (BLOCKS, BINS) each: tallies of several pairs add up.

    ``count`` of pixels; ``level``: sum of their means over both frames; ``freedom`` and ``square``:
    degrees of freedom and sum of squares of the differences. ``changed_px``, ``seen_px``: pixels
    left out because the scene changed there, and all that could be; ``saturated_px``: at the top of
    the scale. ``brightness_change``: how much more light the first frame had, as a part, and its
    variance, summed over ``pairs``.
    """

    count: F64
    level: F64
    freedom: F64
    square: F64
    changed_px: int
    seen_px: int
    saturated_px: int
    brightness_change: float
    brightness_change_var: float
    pairs: int

    def __add__(self, other: Tally) -> Tally:
        return Tally(
            self.count + other.count,
            self.level + other.level,
            self.freedom + other.freedom,
            self.square + other.square,
            self.changed_px + other.changed_px,
            self.seen_px + other.seen_px,
            self.saturated_px + other.saturated_px,
            self.brightness_change + other.brightness_change,
            self.brightness_change_var + other.brightness_change_var,
            self.pairs + other.pairs,
        )


def no_tally() -> Tally:
    """The tally of no pair at all."""
    empty = np.zeros((BLOCKS, BINS))
    return Tally(empty, empty, empty, empty, 0, 0, 0, 0.0, 0.0, 0)


def tally_pair(first: Pixels, second: Pixels, full_scale: int) -> Tally:
    """Tally of one pair of frames of the same scene.

    ``first``, ``second``: (height, width), uint8 or uint16, 8 x 8 at least, as they left the
    sensor. Raises ValueError for frames of different or too small shapes.
    """
    if first.shape != second.shape or first.ndim != 2 or min(first.shape) < 8:
        raise ValueError(
            f"need two frames of one shape, 8 x 8 at least, got {first.shape} and {second.shape}"
        )
    one, other = first.astype(np.float32), second.astype(np.float32)
    mean: F32 = np.asarray((one + other) / 2, dtype=np.float32)
    around = _mean_of_neighbours(mean, 3)
    bins = np.minimum(around * (BINS / (full_scale + 1)), BINS - 1).astype(np.intp)
    within = _within_scale(first, second, full_scale)
    still = _steadied(mean, one - other, bins, within)
    difference, variance = still.difference, still.variance
    changed = still.changed | (np.abs(still.move) > LARGEST_MOVE_SD * np.sqrt(variance))
    use = within & ~changed & ~_lone(mean, variance) & (still.leverage < LARGEST_LEVERAGE)
    use &= difference**2 <= OUTLYING**2 * variance
    where = (_blocks(first.shape)[use] * BINS + bins[use]).ravel()

    def summed(values: F32 | None) -> F64:
        weights = None if values is None else values[use]
        return np.bincount(where, weights, BLOCKS * BINS).reshape(BLOCKS, BINS).astype(np.float64)

    count = summed(None)
    return Tally(
        count,
        summed(mean),
        count - summed(still.leverage),
        summed(difference**2),
        int(np.count_nonzero(changed & within)),
        int(np.count_nonzero(within)),
        int(np.count_nonzero(np.maximum(first, second) >= full_scale)),
        still.brightness_change,
        float(variance[use].mean()) / max(float(mean[use].var()) * count.sum(), 1e-12)
        if use.any()
        else 0.0,
        1,
    )


def _mean_of_neighbours(values: F32, side: int) -> F32:
    """Mean over a square about each pixel, the pixel itself left out."""
    total = cv2.boxFilter(values, -1, (side, side), normalize=False)
    return np.asarray((total - values) / (side * side - 1), dtype=np.float32)


def _within_scale(first: Pixels, second: Pixels, full_scale: int) -> NDArray[np.bool_]:
    """Pixels not at either end of the scale in either frame, nor beside one that is."""
    ends = (first <= 0) | (second <= 0) | (first >= full_scale) | (second >= full_scale)
    return cv2.dilate(ends.astype(np.uint8), np.ones((3, 3), np.uint8)) == 0


def _lone(mean: F32, variance: F32) -> NDArray[np.bool_]:
    """Hot and dead pixels: above or below all their neighbours by more than noise."""
    about = np.array([[1, 1, 1], [1, 0, 1], [1, 1, 1]], np.uint8)
    noise = 2 * np.sqrt(variance)  # four sd of the mean of two
    return np.asarray(
        (mean > cv2.dilate(mean, about) + noise) | (mean < cv2.erode(mean, about) - noise)
    )


def _light_line(difference: F32, level: F32, where: NDArray[np.bool_]) -> tuple[float, float]:
    """Straight line of the difference over the level: its value at 0 and its slope."""
    count, x, y = float(np.count_nonzero(where)), level[where], difference[where]
    if count == 0:
        return 0.0, 0.0
    mean_x, mean_y = float(x.mean(dtype=np.float64)), float(y.mean(dtype=np.float64))
    around = x - np.float32(mean_x)
    spread = float(np.vdot(around, around))
    slope = float(np.vdot(around, y)) / spread if spread > 0 else 0.0
    return mean_y - slope * mean_x, slope


@dataclass(frozen=True, slots=True)
class _Steadied:
    """The difference without what light and movement did to it, (height, width) each.

    ``variance`` of such a difference, ``changed`` where the scene changed by more than that,
    ``move`` what the displacement added and was taken out, ``leverage`` of the pixel on it.
    """

    difference: F32
    variance: F32
    changed: NDArray[np.bool_]
    move: F32
    leverage: F32
    brightness_change: float


def _steadied(mean: F32, raw: F32, bins: NDArray[np.intp], within: NDArray[np.bool_]) -> _Steadied:
    """Take out light and movement; what then is no noise has changed.

    What changed may at first pass for noise of its level, or tilt what is taken out: so it is
    looked at again without what was found to have changed.
    """
    changed, outlying, before = np.zeros_like(within), np.zeros_like(within), 0
    move = np.zeros_like(raw)
    for _ in range(LOOKS):
        still = within & ~changed & ~outlying
        offset, slope = _light_line(raw - move, mean, still)
        lit = raw - np.float32(offset) - np.float32(slope) * mean
        move, leverage = _movement(mean, lit, still)
        steady = lit - move
        steady -= _wide_mean(steady, still)
        variance = _difference_variance(steady, bins, still)
        outlying = steady**2 > OUTLYING**2 * variance
        unusual = np.abs(_mean_of_neighbours(steady, 5)) / np.sqrt(_mean_of_neighbours(variance, 5))
        usual = max(1.4826 * float(np.median(unusual[::3, ::3])), 1 / np.sqrt(24))
        found = (unusual > CHANGED * usual).astype(np.uint8)
        changed |= cv2.dilate(found, np.ones((NEAR_PX, NEAR_PX), np.uint8)) > 0
        count = int(np.count_nonzero(changed | outlying))
        if count <= before + LEAST_NEWS * changed.size:
            break
        before = count
    return _Steadied(steady, variance, changed, move, leverage, slope)


def _wide_mean(values: F32, where: NDArray[np.bool_]) -> F32:
    """Mean over a square about each pixel of what is marked."""
    size, marked = (BAND_PX, BAND_PX), where.astype(np.float32)
    share = cv2.boxFilter(marked, -1, size)
    return np.asarray(cv2.boxFilter(values * marked, -1, size) / np.maximum(share, 1e-3))


def _difference_variance(difference: F32, bins: NDArray[np.intp], within: NDArray[np.bool_]) -> F32:
    """Rough variance of the difference of a pixel of this level, whatever moved.

    From the mean absolute mixed difference, which no change along rows or columns alone enters
    (J. Immerkaer, Comput. Vis. Image Underst. 64 (1996) 300), levels of few pixels together. It
    misses most of a noise that goes from pixel to pixel: the median of all pixels sets that right.
    """
    mixed = difference[:-1, :-1] - difference[1:, :-1] - difference[:-1, 1:] + difference[1:, 1:]
    inside = within[:-1, :-1]
    if not inside.any():
        return np.ones_like(difference)
    up_to = np.cumsum(np.bincount(bins[:-1, :-1][inside], minlength=BINS))
    group = np.maximum(up_to - 1, 0) // LEAST_TOGETHER
    group = np.unique(group, return_inverse=True)[1]
    at, size = group[bins[:-1, :-1][inside]], np.abs(mixed[inside])
    count = np.bincount(at, minlength=group[-1] + 1)
    for _ in range(3):
        mean_size = np.bincount(at, size, count.size) / np.maximum(count, 1)
        # four times the mean is 3.2 sd: a blinking pixel counts for no more
        size = np.minimum(size, (4 * mean_size).astype(np.float32)[at])
    table = np.pi / 2 * (mean_size / 2) ** 2 + 2 * QUANTISATION_VAR
    variance = table[group].astype(np.float32)[bins]
    usual = np.median((difference**2 / variance)[::3, ::3]) / 0.455  # median of chi-square of 1
    return np.asarray(variance * np.float32(max(1.0, usual)))


def _movement(mean: F32, difference: F32, still: NDArray[np.bool_]) -> tuple[F32, F32]:
    """What the local displacement adds to each difference, and each pixel's leverage on it.

    Slopes are those of the smoothed scene: else a displacement would carry their noise along.
    """
    smooth = cv2.GaussianBlur(mean, (0, 0), SMOOTHED_PX)
    ahead = np.array([[-0.5, 0.0, 0.5]], np.float32)
    x, y = cv2.filter2D(smooth, -1, ahead), cv2.filter2D(smooth, -1, ahead.T)

    def over_window(values: F32) -> F32:
        size = (WINDOW_PX, WINDOW_PX)
        return np.asarray(
            cv2.boxFilter(values * still, -1, size, normalize=False, borderType=cv2.BORDER_CONSTANT)
        )

    xx, xy, yy = over_window(x * x), over_window(x * y), over_window(y * y)
    dx, dy = over_window(x * difference), over_window(y * difference)
    least = np.float32(1e-3) * (xx + yy) + np.float32(1e-6)
    xx, yy = xx + least, yy + least
    determinant = xx * yy - xy * xy
    move = ((yy * dx - xy * dy) * x + (xx * dy - xy * dx) * y) / determinant
    leverage = (yy * x * x - 2 * xy * x * y + xx * y * y) / determinant
    return np.asarray(move), np.asarray(leverage)


def _blocks(shape: tuple[int, ...]) -> NDArray[np.intp]:
    """The group of tiles each pixel belongs to, such that every group is spread over the frame."""
    row, column = np.arange(shape[0]) // TILE_PX, np.arange(shape[1]) // TILE_PX
    return np.asarray((column[None, :] + 12 * row[:, None]) % BLOCKS)
