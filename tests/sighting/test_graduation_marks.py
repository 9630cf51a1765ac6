"""Short marks fitted together: bias, spread and honesty against the simulator's truth."""

from __future__ import annotations

import math

import numpy as np
import pytest

from readout.sighting.graduation_marks import FittedMarks, RoughMarks, fit_marks
from readout.sighting.shape import Shape
from tests.sighting.graduated import SENSOR, Scene, scene

ROUGH = Shape(0.0, 0.0, 1.0, 1.3, 1.3)


def fitted(made: Scene, picture: np.ndarray, *, off_px: np.ndarray | None = None) -> tuple:
    """The fit from rough places off the true ones, and the errors left, px."""
    number = np.array(made.ruling.marks())
    at = (number + made.ruling.phase_div) * made.ruling.division_slope
    slope = np.stack([at, np.full(at.size, made.ruling.at_div * made.ruling.division_slope)])
    place = np.linalg.solve(np.array(made.truth.matrix), slope).T + made.truth.p0_px
    height, width = picture.shape
    inside = np.all((place > 16) & (place < (width - 17, height - 17)), axis=1)
    place, number = place[inside], number[inside]
    turn = math.radians(made.truth.rotation_deg + 180 * (made.truth.rotation_deg < -90))
    off = np.zeros(len(place)) if off_px is None else np.resize(off_px, len(place))
    half = np.where(number % 5 == 0, 12.0, 6.0) + 2.5
    rough = RoughMarks(
        place[:, 0] + off * math.cos(turn),
        place[:, 1] + off * math.sin(turn),
        turn,
        -half,
        half,
        8.0,
        ROUGH,
    )
    fit = fit_marks(picture, rough, usable=np.ones(picture.shape, dtype=np.bool_))
    assert fit is not None
    return fit, fit.shift_px + off


@pytest.mark.parametrize("rotation_deg", [0.0, 11.0, -38.0])
def test_without_bias_at_every_phase(rotation_deg: float) -> None:
    # 20.25 px a step: neighbours see four phases of a pixel, seven scales see 28.
    errors = []
    for k in range(7):
        made = scene(
            rotation_deg=rotation_deg, step_px=20.25, crosshair_px=None, phase_div=k / 7 / 20.25
        )
        fit, error = fitted(made, made.clean(), off_px=np.array([0.3, -0.4, 0.1]))
        assert fit.fitted.all()
        errors.append(error)
    assert np.abs(np.concatenate(errors)).max() < 0.002


def test_spread_is_what_is_claimed() -> None:
    seeds = range(40)
    print("seeds", seeds)
    made = scene(rotation_deg=7.3, crosshair_px=None, phase_div=0.31)
    found = [fitted(made, made.frame(seed)) for seed in seeds]
    errors = np.array([error for _, error in found])
    sd = np.array([np.sqrt(np.diag(fit.cov_px2)) for fit, _ in found])
    pull = errors / sd
    n = pull.size
    assert pull.std() == pytest.approx(1.0, abs=4 / math.sqrt(2 * n))
    assert abs(errors.mean()) < 4 * sd.mean() / math.sqrt(n)
    within = np.mean(np.abs(pull) < 1)
    assert within == pytest.approx(0.683, abs=4 * math.sqrt(0.683 * 0.317 / n))


def test_turn_is_found_with_its_uncertainty() -> None:
    made = scene(rotation_deg=5.0, crosshair_px=None)
    seeds = range(30)
    print("seeds", seeds)
    fits: list[FittedMarks] = [fitted(made, made.frame(seed))[0] for seed in seeds]
    turn = np.array([fit.turn_rad for fit in fits])
    sd = float(np.mean([fit.turn_sd_rad for fit in fits]))
    assert turn.std() == pytest.approx(sd, rel=4 / math.sqrt(2 * len(turn)))
    assert abs(turn.mean()) < 4 * sd / math.sqrt(len(turn))


def test_a_spoilt_mark_is_left_out() -> None:
    made = scene(crosshair_px=None)
    picture = made.frame(3).copy()
    clean, _ = fitted(made, made.frame(3))
    rows, columns = np.mgrid[0:240, 0:320]
    x = 160 - 0.5 + 20 * 2  # on mark 2
    picture[np.hypot(columns - x - 3, rows - 119.5 - 3) < 3] = 20
    spoilt, error = fitted(made, picture)
    assert clean.fitted.all()
    assert np.count_nonzero(~spoilt.fitted) == 1
    assert np.nanmax(np.abs(error)) < 0.06


def test_a_saturated_ground_costs_certainty_not_truth() -> None:
    made = scene(crosshair_px=None)
    full = int(SENSOR.mean_levels(6000.0)) - 40
    picture = made.frame(1)
    rough = RoughMarks(
        np.array([60.0, 80.0, 100.0]),
        np.full(3, 119.5),
        0.0,
        np.full(3, -8.0),
        np.full(3, 8.0),
        8.0,
        ROUGH,
    )
    usable = np.ones(picture.shape, dtype=np.bool_)
    plain = fit_marks(picture, rough, usable=usable)
    cut = fit_marks(np.minimum(picture, full), rough, usable=usable, full_scale=full)
    assert plain is not None
    assert cut is not None
    sd = np.sqrt(np.diag(cut.cov_px2))
    assert np.all(sd > 1.2 * np.sqrt(np.diag(plain.cov_px2)))
    assert np.all(np.abs(cut.shift_px + 0.5) < 4 * sd)  # marks lie at 59.5, 79.5 and 99.5


def test_nothing_there_gives_a_guess_at_most() -> None:
    rng = np.random.default_rng(5)
    noise = rng.normal(100, 2, (120, 160)).astype(np.uint8)
    at = np.array([40.0, 60.0, 80.0, 100.0])
    rough = RoughMarks(at, np.full(4, 60.0), 0.0, np.full(4, -8.0), np.full(4, 8.0), 8.0, ROUGH)
    fit = fit_marks(noise, rough, usable=np.ones(noise.shape, dtype=np.bool_))
    assert fit is None or np.nanmin(np.diag(fit.cov_px2)) > 0.1**2  # no more than a guess
