"""Axes turned to a machine's: truth, honesty, and a general line fit beside it."""

import math
from dataclasses import replace

import numpy as np
import odrpack
import pytest

from readout.angle import nominal_calibration
from readout.angle.axes import turn_of_move, turned_to
from readout.errors import BadInput


def move(rng, *, turn_deg, axis, sd=0.05, n=9, reach=200.0):
    """Points of one move about a machine's axis, seen by an instrument turned by ``turn_deg``."""
    steps = np.linspace(-reach, reach, n)
    turn = math.radians(turn_deg)
    direction = {
        "x": (math.cos(turn), math.sin(turn)),
        "y": (-math.sin(turn), math.cos(turn)),
    }[axis]
    points = steps[:, None] * np.array(direction) + np.array([31.0, -12.0])
    return points + rng.normal(0, sd, points.shape), np.tile(sd**2 * np.eye(2), (n, 1, 1))


@pytest.mark.parametrize("axis", ["x", "y"])
@pytest.mark.parametrize("turn_deg", [-40.0, -1.2, 0.0, 7.5])
def test_finds_the_turn(axis, turn_deg):
    found = turn_of_move(*move(np.random.default_rng(80), turn_deg=turn_deg, axis=axis), axis=axis)
    assert abs(found.turn_deg - turn_deg) < 4 * found.turn_sd_deg < 0.1
    assert found.left_over_arcsec < 0.1


def test_the_claimed_sd_covers_the_truth():
    """1000 repeats: 68 % to +-1.5 %."""
    rng, z = np.random.default_rng(81), []
    for _ in range(1000):
        found = turn_of_move(*move(rng, turn_deg=3.0, axis="y"), axis="y")
        z.append((found.turn_deg - 3.0) / found.turn_sd_deg)
    inside = np.mean(np.abs(z) < 1)
    print(f"seed 81: {inside:.3f} within one sd")
    assert 0.63 < inside < 0.73
    assert abs(np.mean(z)) < 4 / math.sqrt(1000)


def test_agrees_with_orthogonal_distance_regression():
    """odrpack on the same points, uncertain on both sides by the same amount."""
    points, cov = move(np.random.default_rng(82), turn_deg=5.0, axis="x", sd=0.5)
    line = odrpack.odr_fit(
        lambda x, beta: beta[0] + beta[1] * x,
        points[:, 0].copy(),
        points[:, 1].copy(),
        np.array([0.0, 0.1]),
        weight_x=4.0,
        weight_y=4.0,
        partol=1e-14,
        sstol=1e-14,
    )
    found = turn_of_move(points, cov, axis="x")
    assert found.turn_deg == pytest.approx(math.degrees(math.atan(line.beta[1])), abs=1e-4)


@pytest.mark.parametrize("axis", ["x", "y"])
def test_a_calibration_so_turned_shows_the_move_in_one_axis(axis):
    at = nominal_calibration(
        focal_length_mm=300.0,
        pitch_um=3.45,
        image_width_px=1280,
        image_height_px=960,
        focal_length_rel_sd=0.0,
        rotation_sd_deg=0.0,
    )
    points, cov = move(np.random.default_rng(83), turn_deg=4.0, axis=axis, sd=1e-6)
    found = turn_of_move(points, cov, axis=axis)
    made = turned_to(at, found)
    shown = np.stack(made.tilt(*at.position(points[:, 0], points[:, 1])), axis=1)
    other = shown[:, 1 if axis == "x" else 0]
    assert np.ptp(other) < 1e-3
    assert np.ptp(shown[:, "xy".index(axis)]) == pytest.approx(400.0, abs=1e-3)
    assert made.made_from["axes"]["turned_deg"] == pytest.approx(4.0, abs=1e-6)
    assert found.leak_arcsec_per_100 == pytest.approx(6.976, abs=1e-3)  # 100" sin 4 deg


def test_the_turns_uncertainty_is_that_of_the_readings():
    """1 degree at 300" in X: 5.2" in Y, none in X (300" sin 1 deg)."""
    at = nominal_calibration(
        focal_length_mm=300.0,
        pitch_um=3.45,
        image_width_px=1280,
        image_height_px=960,
        focal_length_rel_sd=0.0,
        rotation_sd_deg=0.0,
    )
    points, cov = move(np.random.default_rng(84), turn_deg=0.0, axis="x", sd=1e-6)
    found = turn_of_move(points, cov, axis="x")
    made = turned_to(at, replace(found, turn_sd_deg=1.0))
    share = made.calibration_cov(*map(float, made.position(300.0, 0.0)))
    assert np.diag(share) == pytest.approx([0.0, 5.236**2], abs=0.02)


@pytest.mark.parametrize(
    ("turn_deg", "axis", "reach", "words"),
    [
        (80.0, "x", 200.0, "off its axis"),
        (180.0, "y", 200.0, "growing tilt"),
        (0.0, "x", 0.1, "move farther"),
        (0.0, "z", 200.0, "axis is z"),
    ],
)
def test_moves_that_tell_nothing(turn_deg, axis, reach, words):
    points, cov = move(
        np.random.default_rng(85),
        turn_deg=turn_deg,
        axis="x" if axis == "z" else axis,
        reach=reach,
    )
    with pytest.raises(BadInput, match=words):
        turn_of_move(points, cov, axis=axis)


def test_one_point_is_no_move():
    with pytest.raises(BadInput, match="no move"):
        turn_of_move(np.zeros((1, 2)), np.zeros((1, 2, 2)), axis="x")
