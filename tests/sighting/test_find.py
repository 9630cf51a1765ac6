"""The search for arms against frames with known truth: how many it finds, and what else it names.

Random frames of fixed seeds; every rate is printed (``pytest -s``) and asserted. A line counts as
found if a candidate of its polarity is within half its width, or 2 px, of both its ends.
"""

from __future__ import annotations

import math

import numpy as np
import pytest

from readout.sighting.find import find_arms
from readout.sighting.rough import RoughArm, RoughArms
from readout.simulation.crosshair import Crosshair, crosshair_image
from tests.sighting.search_scenes import (
    EMPTY,
    KINDS,
    TrueArm,
    at_contrast,
    exposed,
    returns,
    scale,
)

SEED = 20
FRAMES = 24


def off_px(arm: TrueArm, rough: RoughArm, *, level: bool) -> float:
    """The larger distance of the two ends of an arm from a candidate, px."""
    if rough.polarity != arm.polarity:
        return math.inf
    distances = []
    for end in arm.ends:
        x, y = end[::-1] if level else end
        distances.append(abs(x - float(rough.line.x_at(y))) * rough.line.cosine)
    return max(distances)


def rank_of(arm: TrueArm, found: RoughArms) -> int | None:
    """Place in its list of the first candidate that is the arm; None if there is none."""
    ranks = [
        rank
        for roughs, level in ((found.uprights, False), (found.levels, True))
        for rank, rough in enumerate(roughs)
        if off_px(arm, rough, level=level) <= max(2.0, arm.width_px / 2)
    ]
    return min(ranks, default=None)


@pytest.mark.parametrize(
    ("kind", "least_rate"),
    [
        ("upright", 1.0),
        ("turned", 1.0),
        ("faint", 1.0),
        ("fainter", 0.95),
        ("faintest", 0.6),
        ("short", 0.95),
        ("uneven", 1.0),
        ("round_field", 0.95),
        ("border", 0.95),
        ("outside", 0.92),
        ("returns", 0.95),
        ("fixed", 0.93),
        ("scale", 0.95),
        ("dirty", 0.95),
    ],
)
def test_arms_are_found(kind, least_rate):
    """The rates leave room for one or two lines of some fifty; "faintest" is beyond the promise."""
    arms = found = others = 0
    for k in range(FRAMES):
        scene = KINDS[kind](np.random.default_rng((SEED, list(KINDS).index(kind), k)))
        result = find_arms(scene.pixels)
        hits = sum(rank_of(arm, result) is not None for arm in scene.arms)
        arms, found = arms + len(scene.arms), found + hits
        others += len(result.uprights) + len(result.levels) - hits
    rate = found / arms
    print(f"{kind}: {found} of {arms} found ({rate:.3f}), {others / FRAMES:.2f} others a frame")
    assert rate >= least_rate
    assert others / FRAMES <= 10


@pytest.mark.parametrize(
    ("kind", "most"), [("noise_only", 0.05), ("blobs", 6), ("texture", 0.5), ("page", 6)]
)
def test_what_is_no_arm_gives_few_candidates(kind, most):
    named = 0
    for k in range(FRAMES):
        pixels = EMPTY[kind](np.random.default_rng((SEED, 100 + list(EMPTY).index(kind), k)))
        result = find_arms(pixels)
        assert len(result.uprights) <= 6
        assert len(result.levels) <= 6
        named += len(result.uprights) + len(result.levels)
    print(f"{kind}: {named / FRAMES:.2f} candidates a frame")
    assert named / FRAMES <= most


def test_the_brighter_return_goes_first():
    for k in range(FRAMES):
        scene = returns(np.random.default_rng((SEED, 200, k)))
        result = find_arms(scene.pixels)
        ranks = [rank_of(arm, result) for arm in scene.arms]
        for bright, fainter in ((ranks[0], ranks[2]), (ranks[1], ranks[3])):
            assert bright is not None
            assert fainter is None or bright < fainter or scene.fainter > 0.8


def test_marks_of_a_scale_do_not_crowd_out_the_arms():
    for k in range(FRAMES):
        scene = scale(np.random.default_rng((SEED, 300, k)))
        result = find_arms(scene.pixels)
        for arm in scene.arms:
            rank = rank_of(arm, result)
            assert rank is not None
            assert rank <= 1


@pytest.mark.parametrize("turn_deg", [43.0, 45.0, -45.0, 41.5])
def test_either_arm_near_45_degrees_is_in_one_list_or_the_other(turn_deg):
    """With 5 degrees of skew both arms may be upright, or both level."""
    crosshair = at_contrast(Crosshair(rotation_deg=turn_deg, skew_deg=5.0), 40.0, dark=False)
    rng = np.random.default_rng((SEED, 400))
    result = find_arms(exposed(crosshair_image((480, 640), 300.3, 250.7, crosshair), rng))
    for degrees in (turn_deg + 90, turn_deg + 5):
        dx, dy = 100 * math.cos(math.radians(degrees)), 100 * math.sin(math.radians(degrees))
        arm = TrueArm(((300.3 - dx, 250.7 - dy), (300.3 + dx, 250.7 + dy)), 5.0, 1)
        assert rank_of(arm, result) is not None


def _frame() -> np.ndarray:
    crosshair = at_contrast(Crosshair(rotation_deg=7.0, skew_deg=-3.0), 30.0, dark=True)
    rng = np.random.default_rng((SEED, 500))
    return exposed(crosshair_image((480, 640), 300.3, 250.7, crosshair), rng)


def test_a_transposed_picture_has_its_lists_exchanged():
    """An exact property; and the same picture gives the same arms."""
    pixels = _frame()
    result = find_arms(pixels)
    swapped = find_arms(np.ascontiguousarray(pixels.T))
    assert (swapped.uprights, swapped.levels) == (result.levels, result.uprights)
    assert find_arms(pixels) == result


def test_a_mirrored_picture_has_its_uprights_mirrored():
    """It pins the origin at the centre of the top-left pixel."""
    pixels = _frame()
    arm = find_arms(pixels).uprights[0]
    mirrored = find_arms(np.ascontiguousarray(pixels[:, ::-1])).uprights[0]
    for y in (0.0, 479.0):
        assert float(mirrored.line.x_at(y)) == pytest.approx(639 - float(arm.line.x_at(y)), abs=0.2)


def test_sixteen_bits_give_the_same_arms():
    pixels = _frame()
    fine = find_arms(pixels.astype(np.uint16) * 257)
    for of_fine, of_coarse in zip(fine.uprights, find_arms(pixels).uprights, strict=True):
        assert of_fine.line.middle_x == pytest.approx(of_coarse.line.middle_x, abs=1e-3)
        assert of_fine.polarity == of_coarse.polarity == -1


@pytest.mark.parametrize("shape", [(720, 1280), (481, 643), (241, 319)])
def test_any_size_of_picture(shape):
    """Sides that are no multiple of anything."""
    crosshair = at_contrast(Crosshair(rotation_deg=-4.0), 30.0, dark=False)
    x, y = shape[1] * 0.4, shape[0] * 0.6
    rng = np.random.default_rng((SEED, 600))
    result = find_arms(exposed(crosshair_image(shape, x, y, crosshair), rng))
    assert float(result.uprights[0].line.x_at(y)) == pytest.approx(x, abs=1.0)
    assert float(result.levels[0].line.x_at(x)) == pytest.approx(y, abs=1.0)


@pytest.mark.parametrize(
    "shape",
    [(1, 1), (1, 700), (700, 1), (2, 3), (5, 60), (24, 5), (24, 24), (7, 900), (3, 100_000)],
)
def test_nothing_raises(shape):
    rng = np.random.default_rng((SEED, 700))
    noise = rng.integers(0, 65536, shape).astype(np.uint16)
    for pixels in (
        np.zeros(shape, np.uint8),
        np.full(shape, 255, np.uint8),
        np.full(shape, 65535, np.uint16),
        noise,
        (noise & 255).astype(np.uint8),
        np.where(noise > 40000, 65535, 0).astype(np.uint16),
    ):
        result = find_arms(pixels)
        for arm in result.uprights + result.levels:
            assert np.all(np.isfinite([arm.line.middle_x, arm.line.slope, arm.strength]))


def test_flat_pictures_have_no_arms():
    for level in (0, 40, 255):
        assert find_arms(np.full((480, 640), level, np.uint8)) == RoughArms((), ())
