"""The bench's own frames: the same from their names, fair to the truth, and its limits right."""

from __future__ import annotations

import numpy as np
import pytest

from tests.bench.gross import upper_limit
from tests.bench.kinds import BITS8, REFERENCE, SHAPE, WANDER_PX, Kind
from tests.bench.mixed import NO_TARGET, WITH_TARGET, mixed_picture, sort_of
from tests.bench.placing import KINDS, Placed
from tests.bench.tables import PLACING_HEAD, placing_row, rms_of

CROSSHAIRS = [
    name for name, kind in KINDS.items() if kind.target == "crosshair" and "12 bit" not in name
]


@pytest.mark.parametrize("name", KINDS)
def test_a_frame_follows_from_kind_seed_and_number(name: str) -> None:
    one, again, next_one = (KINDS[name].picture(2, k) for k in (5, 5, 6))
    np.testing.assert_array_equal(one.pixels, again.pixels)
    assert (one.x_px, one.y_px) == (again.x_px, again.y_px)
    assert np.any(one.pixels != next_one.pixels)
    assert one.pixels.shape == SHAPE
    assert one.full_scale == (255 if one.pixels.dtype == np.uint8 else 4095)
    for step in (one.x_px - next_one.x_px, one.y_px - next_one.y_px):
        assert 0 < abs(step) < 0.6


def test_the_wander_meets_every_phase_evenly() -> None:
    """Four hundred places, eight bins of phase: 50 each, binomial sd 6.6."""
    places = np.array([KINDS["clean, 8 bit"].truth(1, k) for k in range(400)])
    assert np.abs(places - np.array([320, 240])).max() <= WANDER_PX
    for axis in (0, 1):
        counts = np.histogram(places[:, axis] % 1, 8, (0, 1))[0]
        assert counts.min() > 50 - 4 * 6.6
        assert counts.max() < 50 + 4 * 6.6


@pytest.mark.parametrize("name", CROSSHAIRS)
def test_the_light_lies_about_the_truth(name: str) -> None:
    """Row and column sums, away from the borders, have their centre where the crossing is.

    Coarse on purpose: it would show a truth given in another convention, by half a pixel.
    """
    kind = KINDS[name]
    sums = {0: [], 1: []}
    for k in range(0, 60, 6):
        picture = kind.picture(0, k)
        light = np.abs(picture.pixels.astype(float) - np.median(picture.pixels))
        for axis, centre in ((0, picture.x_px), (1, picture.y_px)):
            half = 14
            start = round(centre) - half
            window = light.sum(axis=axis)[start : start + 2 * half + 1]
            window = window - window.min()
            place = float(window @ np.arange(start, start + 2 * half + 1) / window.sum())
            sums[axis].append(place - centre)
    limit = 1.2 if kind.light is not None else 0.35
    assert abs(np.mean(sums[0])) < limit
    assert abs(np.mean(sums[1])) < limit


def test_one_frame_in_ten_shows_no_return_and_every_sort_occurs() -> None:
    sorts = [sort_of(k) for k in range(240)]
    assert sorts.count(WITH_TARGET) == 216
    assert set(sorts) == {WITH_TARGET, *NO_TARGET}


@pytest.mark.parametrize("k", [*range(9, 89, 10), *range(3)])
def test_a_mixed_frame_follows_from_seed_and_number(k: int) -> None:
    sort, picture = mixed_picture(1, k)
    again, same = mixed_picture(1, k)
    assert sort == again == sort_of(k)
    np.testing.assert_array_equal(picture.pixels, same.pixels)
    assert np.isfinite(picture.x_px) == np.isfinite(picture.y_px) == (sort == WITH_TARGET)


def test_an_rms_comes_with_its_standard_error() -> None:
    """Normal errors: the rms of n has a standard error of rms / sqrt(2 n)."""
    errors = 3.0 * np.random.default_rng(71).standard_normal((400, 250))
    rms, se = np.array([rms_of(row) for row in errors]).T
    assert rms.mean() == pytest.approx(3.0, rel=0.01)
    assert rms.std() == pytest.approx(3.0 / np.sqrt(500), rel=4 / np.sqrt(800))
    assert se.mean() == pytest.approx(3.0 / np.sqrt(500), rel=0.03)


def test_a_lost_frame_counts_for_nothing_and_a_gross_one_is_counted() -> None:
    errors = np.array([[0.01, -0.02], [np.nan, np.nan], [0.0, 0.3], [0.5, 0.0]])
    placed = Placed(errors, np.full((4, 2), 0.05), np.array([False, True, False, True]))
    row = dict(zip(PLACING_HEAD, placing_row(Kind("one"), "0", placed), strict=True))
    assert (row["frames"], row["lost"], row["gross"], row["flagged"]) == ("4", "1", "1", "1")
    assert row["within 1 sd"].startswith("66.7")  # four of six
    assert row["rms y µpx"].startswith(f"{1e6 * np.sqrt((0.02**2 + 0.3**2) / 3):.0f} ")


def test_the_upper_limit_of_a_share() -> None:
    """None of n: 1 - 0.05^(1/n), which is near 3/n (the rule of three, J. A. Hanley, A.

    Lippman-Hand, JAMA 249 (1983) 1743); one of ten: 0.3942 (solved from the binomial sum).
    """
    assert upper_limit(0, 5000) == pytest.approx(1 - 0.05 ** (1 / 5000), rel=1e-9)
    assert upper_limit(0, 5000) == pytest.approx(3 / 5000, rel=0.01)
    share = upper_limit(1, 10)
    assert (1 - share) ** 10 + 10 * share * (1 - share) ** 9 == pytest.approx(0.05, rel=1e-6)
    assert upper_limit(3, 3) == 1.0


def test_a_kind_of_another_name_has_other_noise() -> None:
    one, other = (Kind(name, REFERENCE, BITS8).picture(0, 0) for name in ("one", "other"))
    assert np.any(one.pixels != other.pixels)
