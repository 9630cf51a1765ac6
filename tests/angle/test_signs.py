"""The nudge and the foil: what each says, and what becomes of the calibration."""

import math
from dataclasses import replace

import numpy as np
import pytest

from readout.angle import Mounting, nominal_calibration
from readout.angle.scales import Ratio
from readout.angle.signs import (
    Change,
    Direction,
    Foil,
    axes_shown,
    judge_foil,
    judge_nudge,
    with_signs,
)
from readout.errors import BadInput

FOIL = Foil(0.05, 100.0)
WHEN = "2026-05-04T10:00:00.000Z"


def change(x, y, sd=0.05):
    return Change(x, y, sd, sd)


def calibration(mounting=Mounting.STRAIGHT, rotation_deg=0.0, focal_length_mm=300.0):
    return nominal_calibration(
        focal_length_mm=focal_length_mm,
        pitch_um=3.45,
        image_width_px=1280,
        image_height_px=960,
        mounting=mounting,
        rotation_deg=rotation_deg,
    )


def seen_with(taken, truth, x, y):
    """What a calibration shows for a true tilt from 0 to (x, y)."""
    before = taken.tilt(*truth.position(0.0, 0.0))
    after = taken.tilt(*truth.position(x, y))
    return change(*(float(b - a) for a, b in zip(before, after, strict=True)))


def test_the_foil_of_the_design():
    """0.05 mm under 100 mm: 103.1" (geometry)."""
    assert pytest.approx(103.1, abs=0.05) == FOIL.tilt_arcsec
    assert pytest.approx(math.degrees(math.asin(0.0005)) * 3600) == FOIL.tilt_arcsec
    assert Foil(0.05, 100.0, 0.002, 1.0).rel_sd == pytest.approx(math.hypot(0.04, 0.01))
    with pytest.raises(BadInput, match="which is which"):
        Foil(100.0, 0.05)


@pytest.mark.parametrize(
    ("edge", "moved", "direction", "seen", "sign"),
    [
        ("top", (2.0, 40.0), Direction.RIGHT, 1, 1),
        ("top", (2.0, -40.0), Direction.MIRRORED, 1, -1),
        ("top", (40.0, 3.0), Direction.SWAPPED, 0, 1),
        ("right", (40.0, 3.0), Direction.RIGHT, 0, 1),
        ("right", (-40.0, 3.0), Direction.MIRRORED, 0, -1),
        ("right", (1.0, -40.0), Direction.SWAPPED, 1, -1),
        ("top", (0.1, 0.2), Direction.UNCLEAR, None, 0),
        ("top", (30.0, 40.0), Direction.UNCLEAR, None, 0),
        ("top", (math.nan, math.nan), Direction.UNCLEAR, None, 0),
    ],
)
def test_a_nudge(edge, moved, direction, seen, sign):
    verdict = judge_nudge(edge, change(*moved))
    assert (verdict.direction, verdict.seen, verdict.sign) == (direction, seen, sign)
    assert verdict.made == (edge == "top")
    if direction is not Direction.UNCLEAR:
        assert f"{abs(moved[1]):.1f}″" in verdict.text


def test_a_change_within_its_noise_is_none():
    assert judge_nudge("top", change(0.0, 4.0, sd=1.0)).direction is Direction.UNCLEAR
    assert judge_nudge("top", change(0.0, 6.0, sd=1.0)).direction is Direction.RIGHT


@pytest.mark.parametrize(
    ("factor", "says"),
    [(1.0, Ratio.AGREES), (0.5, Ratio.HALF), (2.0, Ratio.DOUBLE), (1.3, Ratio.DIFFERS)],
)
@pytest.mark.parametrize("sign", [1, -1])
def test_a_foil_names_the_factor(factor, says, sign):
    """A focal length taken for another shows as that factor, whatever the direction."""
    truth, taken = calibration(), calibration(focal_length_mm=300.0 / factor)
    if sign < 0:
        taken = calibration(Mounting.UPSIDE_DOWN, focal_length_mm=300.0 / factor)
    foil = Foil(0.05, 100.0, 0.001, 0.5)
    verdict = judge_foil(foil, seen_with(taken, truth, 0.0, foil.tilt_arcsec))
    assert verdict.scale.ratio == pytest.approx(factor, rel=1e-4)
    assert verdict.scale.ratio_u == pytest.approx(factor * math.hypot(0.02, 0.005), rel=1e-2)
    assert verdict.scale.says is says
    assert verdict.direction is (Direction.RIGHT if sign > 0 else Direction.MIRRORED)


def test_a_foil_shows_the_turn_of_the_camera():
    """A camera turned by 2 degrees and taken for upright."""
    truth, taken = calibration(rotation_deg=2.0), calibration()
    verdict = judge_foil(FOIL, seen_with(taken, truth, 0.0, FOIL.tilt_arcsec))
    assert abs(verdict.turn_deg) == pytest.approx(2.0, abs=1e-3)


@pytest.mark.parametrize("mounting", list(Mounting))
@pytest.mark.parametrize("rotation_deg", [0.0, 90.0, 180.0, -90.0])
def test_both_edges_put_any_mounting_right(mounting, rotation_deg):
    truth, taken = calibration(mounting, rotation_deg), calibration()
    verdicts = [
        judge_nudge("top", seen_with(taken, truth, 1.0, 60.0)),
        judge_nudge("right", seen_with(taken, truth, 60.0, -2.0)),
    ]
    proven = with_signs(taken, verdicts, done_utc=WHEN)
    assert proven.signs == "proven"
    assert np.array(proven.matrix) == pytest.approx(np.array(truth.matrix), abs=1e-18)
    assert not any("unproven" in warning for warning in proven.warnings)
    put_right = any("put right" in warning for warning in proven.warnings)
    assert put_right == (not np.allclose(taken.matrix, truth.matrix, atol=1e-9))
    assert [shown["done_utc"] for shown in proven.signs_shown] == [WHEN, WHEN]
    assert proven.signs_shown[0]["how"].startswith("top edge pressed")
    there = proven.calibration_cov(*map(float, truth.position(300.0, 100.0)))
    true = truth.calibration_cov(*map(float, truth.position(300.0, 100.0)))
    assert there == pytest.approx(true, rel=1e-6, abs=1e-9)


def test_one_edge_proves_one_axis_only():
    made = with_signs(calibration(), [judge_nudge("top", change(0.0, 40.0))], done_utc=WHEN)
    assert made.signs == "unproven"
    assert made.warnings[0] == "signs unproven: still to be pressed, the right edge"
    assert len(made.signs_shown) == 1


def test_an_unclear_push_proves_nothing_and_is_told():
    pushes = [judge_nudge("top", change(0.0, 40.0)), judge_nudge("right", change(0.1, 0.0))]
    made = with_signs(calibration(), pushes, done_utc=WHEN)
    assert made.signs == "unproven"
    assert any("nothing clear moved" in warning for warning in made.warnings)


def test_contradictions_are_refused():
    with pytest.raises(BadInput, match="contradict"):
        axes_shown([judge_nudge("top", change(0, 40.0)), judge_nudge("top", change(0, -40.0))])
    with pytest.raises(BadInput, match="both edges moved Y"):
        axes_shown([judge_nudge("top", change(0, 40.0)), judge_nudge("right", change(0, 40.0))])


def test_no_test_leaves_all_as_it_was():
    assert with_signs(calibration(), [], done_utc=WHEN) == calibration()
    assert axes_shown([]) is None


def test_a_foil_with_a_wrong_scale_is_told_beside_proven_signs():
    taken, truth = calibration(focal_length_mm=150.0), calibration()
    made = with_signs(
        taken,
        [
            judge_foil(FOIL, seen_with(taken, truth, 0.0, FOIL.tilt_arcsec)),
            judge_nudge("right", seen_with(taken, truth, 30.0, 0.0)),
        ],
        done_utc=WHEN,
    )
    assert made.signs == "proven"
    assert any("a factor of 2" in warning for warning in made.warnings)
    assert made.signs_shown[0]["ratio"] == pytest.approx(2.0, rel=1e-4)
    assert replace(made, signs_shown=()).signs_shown == ()
