"""What pushes say of the axes, against an instrument whose axes are known."""

from __future__ import annotations

import itertools

import numpy as np
import pytest

from readout.angle import nominal_calibration
from readout.errors import BadInput
from readout.instrument.signs_seen import Foil, Outcome, Push, judge, judge_foil, with_proven_signs

TRUE = nominal_calibration(
    focal_length_mm=300.0, pitch_um=3.45, image_width_px=640, image_height_px=480, rotation_deg=3.0
)
EXCHANGES = [
    np.array(rows)
    for a, b in itertools.product((1, -1), repeat=2)
    for rows in (((a, 0), (0, b)), ((0, a), (b, 0)))
]


def seen_by(turn: np.ndarray, x_arcsec: float, y_arcsec: float) -> Push:
    """A small push of the mirror, as a calibration whose slopes are turned shows it."""
    x, y = (turn @ np.array([x_arcsec, y_arcsec])).tolist()
    return Push(x, y)


@pytest.mark.parametrize("turn", EXCHANGES)
def test_every_mirror_image_is_recognised_and_put_right(turn: np.ndarray) -> None:
    verdict = judge(top=seen_by(turn, 1.0, 20.0), right=seen_by(turn, 30.0, -2.0))
    exchanged = turn[0, 0] == 0
    if exchanged:
        assert verdict.outcome is Outcome.SWAPPED
    elif (turn == np.eye(2)).all():
        assert verdict.outcome is Outcome.PROVEN
    else:
        assert verdict.outcome is Outcome.MIRRORED
    assert verdict.turn is not None
    # The true slopes come out again whatever was taken for granted: T T' = 1.
    assert np.array_equal(np.array(verdict.turn) @ turn, np.eye(2))
    wrong = with_proven_signs(TRUE, tuple(map(tuple, turn.tolist())))
    right = with_proven_signs(wrong, verdict.turn)
    np.testing.assert_allclose(right.matrix, TRUE.matrix, rtol=0, atol=1e-18)
    np.testing.assert_allclose(right.param_cov, TRUE.param_cov, rtol=0, atol=1e-24)
    assert right.signs == "proven"
    assert not any("signs unproven" in warning for warning in right.warnings)


def test_an_axis_that_runs_backwards_is_named() -> None:
    verdict = judge(top=Push(0.5, -20.0), right=Push(10.0, 0.0))
    assert verdict.outcome is Outcome.MIRRORED
    assert verdict.text.startswith("Y runs backwards")
    assert "mounting" in verdict.text


def test_one_push_proves_nothing_yet() -> None:
    verdict = judge(top=Push(0.0, 20.0), right=None)
    assert (verdict.outcome, verdict.turn) == (Outcome.UNPROVEN, None)
    assert "right edge" in verdict.text
    both = judge(top=Push(0.0, 20.0), right=Push(1.0, 20.0))
    assert both.outcome is Outcome.UNPROVEN
    assert "both edges moved Y" in both.text


@pytest.mark.parametrize(
    ("push", "word"), [(Push(0.3, 0.4), "harder"), (Push(20.0, -15.0), "too alike")]
)
def test_a_push_that_shows_nothing_is_refused_with_what_to_do(push: Push, word: str) -> None:
    with pytest.raises(BadInput, match=word):
        _ = push.along


def test_a_foil_of_0_05_mm_under_100_mm_is_103_1_arcsec() -> None:
    """By hand: 0.05/100 rad = 0.0005 * 206264.806 = 103.1."""
    foil = Foil(0.05, 100.0, thickness_sd_mm=0.001, base_sd_mm=0.2)
    assert foil.tilt_arcsec == pytest.approx(103.132, abs=1e-3)
    # 2 % of the thickness, 0.2 % of the base.
    assert foil.tilt_sd_arcsec == pytest.approx(103.132 * np.hypot(0.02, 0.002), rel=1e-4)


FOIL = Foil(0.05, 100.0, thickness_sd_mm=0.001, base_sd_mm=0.2)


@pytest.mark.parametrize(
    ("seen_arcsec", "right", "word"),
    [
        (105.0, True, "right"),
        (-101.0, True, "right"),
        (206.0, False, "factor of 2"),
        (51.0, False, "factor of 0.5"),
        (140.0, False, "calibrate anew"),
    ],
)
def test_the_foil_proves_the_scale_or_names_the_factor(
    seen_arcsec: float, right: bool, word: str
) -> None:
    verdict, text = judge_foil(FOIL, Push(1.0, seen_arcsec), 0.1)
    assert verdict is right
    assert word.lower() in text.lower()
    assert "103.1" in text


def test_a_foil_thicker_than_its_base_is_refused() -> None:
    with pytest.raises(BadInput, match="which is which"):
        Foil(5.0, 2.0, 0.0, 0.0)
