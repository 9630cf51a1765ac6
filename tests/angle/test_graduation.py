"""From marks to a calibration: exact geometry, honesty, and whole noisy frames."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest

from readout.angle import Camera, Mounting
from readout.angle.calibration import Calibration
from readout.angle.graduation import calibrate_graduation, refuse_other_meaning
from readout.angle.graduation_division import Division, MarkedAs, division
from readout.angle.nominal import nominal_calibration
from readout.angle.scales import Ratio, compare_scales, refuse_factor_of_two
from readout.errors import BadInput
from readout.sighting.graduation import Graduation, Scale, find_graduation
from readout.sighting.shape import Shape
from readout.units import ARCSEC_PER_RAD
from tests.sighting.graduated import scene

SIZE = (640, 480)
STEP_PX = 20.0


def truth(
    rotation_deg: float = 0.0, mounting: Mounting = Mounting.STRAIGHT, k1: float = 0.0
) -> Calibration:
    made = nominal_calibration(
        focal_length_mm=300.0,
        pitch_um=3.45,
        image_width_px=SIZE[0],
        image_height_px=SIZE[1],
        rotation_deg=rotation_deg,
        mounting=mounting,
    )
    return replace(made, k1=k1)


def marks(
    true: Calibration,
    *,
    upright: bool = False,
    at: tuple[float, float] = (0.2, 0.4),
    count: int = 10,
    sd_px: float = 0.01,
    noise_px: np.ndarray | None = None,
    line: bool = True,
    direction_noise: tuple[float, float] = (0.0, 0.0),
) -> Scale:
    """Marks of a scale from ``-count`` to ``count`` where the true calibration has them.

    ``at``: of mark 0 along and of the axis across, in divisions.
    """
    slope = STEP_PX / true.focal_length_px
    axis = int(upright)
    number = np.arange(-count, count + 1)

    def place(along: np.ndarray, across: np.ndarray | float) -> np.ndarray:
        w = np.zeros((along.size, 2))
        w[:, axis], w[:, 1 - axis] = along * slope, np.asarray(across) * slope
        q = w.copy()
        for _ in range(30):  # q (1 + k1 |q|^2) = w, by plain repetition
            q = w / (1 + true.k1 * np.sum(q**2, axis=1))[:, None]
        return np.linalg.solve(np.array(true.matrix), q.T).T + true.p0_px

    places = place(number + at[0], at[1])
    if places[-1, axis] < places[0, axis]:
        places = places[::-1]
    middle = float(number.mean()) + at[0]
    (x0, y0), (x1, y1) = place(np.array([middle - 0.01, middle + 0.01]), at[1])
    turn = math.atan2(y1 - y0, x1 - x0)
    (x0, y0), (x1, y1) = place(np.array([middle, middle]), np.array([at[1] - 0.01, at[1] + 0.01]))
    mark = math.atan2(y1 - y0, x1 - x0) - math.pi / 2
    ahead = math.pi / 2 if upright else 0.0

    def towards(angle: float) -> float:
        return ahead + math.remainder(angle - ahead, math.pi)

    along = np.array([math.cos(towards(turn)), math.sin(towards(turn))])
    if noise_px is not None:
        places = places + noise_px[:, None] * along
    return Scale(
        numbers=np.arange(number.size),
        place_px=places,
        cov_px2=sd_px**2 * np.eye(number.size),
        turn_rad=towards(turn) + direction_noise[0],
        turn_sd_rad=2e-5 if line else math.inf,
        mark_turn_rad=towards(mark) + direction_noise[1],
        mark_turn_sd_rad=3e-4,
        longer=np.zeros(number.size, dtype=np.bool_),
        polarity=-1,
        left_out=(),
        shape=Shape(0.0, 0.0, 1.0, 1.0, 1.0),
    )


def means(true: Calibration, rel_sd: float | None = 0.0) -> Division:
    slope = STEP_PX / true.focal_length_px
    return Division(slope, rel_sd, "a division as drawn")


@pytest.mark.parametrize("mounting", list(Mounting))
@pytest.mark.parametrize("rotation_deg", [0.0, 3.0, -40.0])
@pytest.mark.parametrize("scales", ["level", "upright", "both"])
def test_exact_marks_give_the_exact_matrix(
    mounting: Mounting, rotation_deg: float, scales: str
) -> None:
    true = truth(rotation_deg, mounting)
    seen = Graduation(
        marks(true) if scales != "upright" else None,
        marks(true, upright=True, count=8) if scales != "level" else None,
    )
    made = calibrate_graduation(seen, means(true), Camera(*SIZE, 3.45, mounting))
    np.testing.assert_allclose(made.matrix, true.matrix, rtol=0, atol=1e-12)
    assert abs(math.remainder(made.rotation_deg - true.rotation_deg, 360)) < 1e-6
    assert made.mirrored == true.mirrored
    assert made.signs == "unproven"
    assert made.focal_length_mm == pytest.approx(300.0, rel=1e-9)


def test_two_scales_show_pixels_that_are_not_square() -> None:
    true = truth(4.0)
    stretched = np.array(true.matrix) @ np.diag([1.0, 1.01])
    true = replace(true, matrix=tuple(map(tuple, stretched.tolist())))
    made = calibrate_graduation(
        Graduation(marks(true), marks(true, upright=True)), means(true), Camera(*SIZE)
    )
    np.testing.assert_allclose(made.matrix, true.matrix, rtol=0, atol=2e-10)


def test_distortion_is_found_where_the_marks_show_it_and_only_there() -> None:
    rng = np.random.default_rng(11)
    for k1 in (0.0, 400.0):
        true = truth(2.0, k1=k1)
        seen = Graduation(marks(true, count=14, noise_px=rng.normal(0, 0.01, 29)), None)
        made = calibrate_graduation(seen, means(true), Camera(*SIZE))
        if k1 == 0:
            assert made.k1 == 0
        else:
            assert made.k1 == pytest.approx(k1, abs=4 * math.sqrt(made.param_cov[6][6]))
            assert any("distortion" in warning for warning in made.warnings)
        share = made.focal_length_px / true.focal_length_px - 1
        assert abs(share) < 4 * made.focal_length_px_sd / made.focal_length_px


def test_beam_angle_and_mirror_tilt_differ_by_exactly_two() -> None:
    true = truth(5.0)
    seen = Graduation(marks(true), None)
    tilt, beam = (
        calibrate_graduation(
            seen, division(spacing_arcsec=20.0, marked_as=marked_as), Camera(*SIZE)
        )
        for marked_as in (MarkedAs.MIRROR_TILT, MarkedAs.BEAM_ANGLE)
    )
    np.testing.assert_allclose(np.array(tilt.matrix), 2 * np.array(beam.matrix), rtol=1e-12)


@pytest.mark.parametrize(
    ("marked_as", "says"),
    [(MarkedAs.MIRROR_TILT, Ratio.AGREES), (MarkedAs.BEAM_ANGLE, Ratio.DOUBLE)],
)
def test_a_lever_step_names_the_wrong_meaning(marked_as: MarkedAs, says: Ratio) -> None:
    true = truth()
    by_lever = replace(true, id="lever", method="lever")
    tilt_arcsec = 0.5 * STEP_PX / true.focal_length_px * ARCSEC_PER_RAD
    made = calibrate_graduation(
        Graduation(marks(true), None),
        division(spacing_arcsec=tilt_arcsec, marked_as=marked_as, rel_sd=0.0),
        Camera(*SIZE),
    )
    assert compare_scales(by_lever, made).says is says
    if says is Ratio.AGREES:
        refuse_factor_of_two(by_lever, made)
    else:
        with pytest.raises(BadInput, match="mirror tilt or beam angle"):
            refuse_factor_of_two(by_lever, made)


def test_the_other_meaning_is_named_against_the_nominal_focal_length() -> None:
    true = truth()
    tilt_arcsec = 0.5 * STEP_PX / true.focal_length_px * ARCSEC_PER_RAD
    for marked_as, wrong in ((MarkedAs.MIRROR_TILT, False), (MarkedAs.BEAM_ANGLE, True)):
        made = calibrate_graduation(
            Graduation(marks(true), None),
            division(spacing_arcsec=tilt_arcsec, marked_as=marked_as),
            Camera(*SIZE, 3.45),
        )
        if wrong:
            with pytest.raises(BadInput, match=r"factor of 0\.5.*change marked_as"):
                refuse_other_meaning(made, 300.0)
        else:
            refuse_other_meaning(made, 300.0)


def test_no_number_of_marks_reduces_the_scales_own_uncertainty() -> None:
    true = truth()
    few, many = (
        calibrate_graduation(
            Graduation(marks(true, count=count), None), means(true, 2e-3), Camera(*SIZE)
        )
        for count in (3, 14)
    )
    for made in (few, many):
        assert made.focal_length_px_sd / made.focal_length_px == pytest.approx(2e-3, rel=0.02)
    unsaid = calibrate_graduation(Graduation(marks(true), None), means(true, None), Camera(*SIZE))
    assert any("own uncertainty was not given" in warning for warning in unsaid.warnings)


@pytest.mark.parametrize("both", [False, True])
def test_a_thousand_repeats_cover_the_truth(both: bool) -> None:
    seed, n = 17, 1000
    print("seed", seed)
    rng = np.random.default_rng(seed)
    true = truth(8.0)

    def noisy(upright: bool) -> Scale:
        return marks(
            true,
            upright=upright,
            noise_px=rng.normal(0, 0.01, 21),
            direction_noise=(rng.normal(0, 2e-5), rng.normal(0, 3e-4)),
        )

    scale, turn = [], []
    for _ in range(n):
        seen = Graduation(noisy(False), noisy(True) if both else None)
        made = calibrate_graduation(seen, means(true), Camera(*SIZE))
        off = made.focal_length_px - true.focal_length_px
        scale.append(off / made.focal_length_px_sd)
        x_row = np.array(made.param_cov)[:2, :2]
        a, c = np.array(made.matrix[0]), np.array(made.matrix[0])[::-1] * (-1, 1)
        turn_sd = math.sqrt(c @ x_row @ c) / (a @ a)
        turn.append(math.radians(made.rotation_deg - true.rotation_deg) / turn_sd)
    for pull in (np.array(scale), np.array(turn)):
        assert np.mean(np.abs(pull) < 1) == pytest.approx(0.683, abs=0.05)
        assert abs(pull.mean()) < 4 / math.sqrt(n)


@pytest.mark.slow
def test_whole_noisy_frames_cover_the_truth() -> None:
    seed, n = 2026, 80
    print("seed", seed)
    rng = np.random.default_rng(seed)
    pulls = []
    for k in range(n):
        made = scene(
            rotation_deg=rng.uniform(-44, 44),
            step_px=rng.uniform(14, 26),
            crosshair_px=(rng.uniform(60, 260), rng.uniform(60, 180)),
            crosshair_deg=rng.uniform(-5, 5),
            depth=rng.uniform(0.4, 0.9),
            lit=bool(rng.random() < 0.3),
            phase_div=rng.random(),
            at_div=rng.uniform(-1, 1),
        )
        slope = made.ruling.division_slope
        found = calibrate_graduation(
            find_graduation(made.frame(k), full_scale=255),
            Division(slope, 0.0, "as drawn"),
            Camera(320, 240),
        )
        share = found.focal_length_px / made.truth.focal_length_px - 1
        assert abs(share) < 5e-4
        pulls.append(share * found.focal_length_px / found.focal_length_px_sd)
    within = np.mean(np.abs(pulls) < 1)
    assert within == pytest.approx(0.683, abs=3 * math.sqrt(0.683 * 0.317 / n))


@pytest.mark.parametrize("rotation_deg", [0.0, 14.0])
def test_one_noisy_frame_with_the_crosshair_across(rotation_deg: float) -> None:
    made = scene(rotation_deg=rotation_deg, phase_div=0.4, at_div=0.3)
    found = calibrate_graduation(
        find_graduation(made.frame(12), full_scale=255),
        Division(made.ruling.division_slope, 0.0, "as drawn"),
        Camera(320, 240, 3.45),
    )
    assert found.focal_length_px == pytest.approx(made.truth.focal_length_px, rel=5e-4)
    assert found.rotation_deg == pytest.approx(made.truth.rotation_deg, abs=0.05)


def test_an_eyepiece_seen_by_a_webcam_gives_angles_without_pitch_or_focal_length() -> None:
    # 1.7 times enlarged and bent by the webcam's lens: neither 300 mm nor 3.45 µm mean anything.
    made = scene(shape=(480, 640), step_px=34.0, k1=500.0, rotation_deg=-6.0, both=True)
    found = calibrate_graduation(
        find_graduation(made.frame(13), full_scale=255),
        Division(made.ruling.division_slope, 0.0, "as drawn"),
        Camera(*SIZE),
        own_lens=True,
    )
    assert found.focal_length_mm is None
    x, y = np.array([80.0, 320.0, 560.0]), np.array([60.0, 240.0, 400.0])
    off = np.array(found.tilt(x, y)) - np.array(made.truth.tilt(x, y))
    assert np.abs(off).max() < 5e-4 * np.abs(made.truth.tilt(x, y)).max()


def test_an_askew_camera_is_named() -> None:
    true = truth()
    seen = marks(true, noise_px=3e-4 * (np.arange(21) - 10.0) ** 2 - 0.01)
    made = calibrate_graduation(Graduation(seen, None), means(true), Camera(*SIZE))
    assert any("askew" in warning for warning in made.warnings)


def test_errors_of_the_ruling_widen_the_claim() -> None:
    rng = np.random.default_rng(23)
    true = truth()
    seen = marks(true, noise_px=rng.normal(0, 0.08, 21))
    made = calibrate_graduation(Graduation(seen, None), means(true), Camera(*SIZE))
    assert any("widened" in warning for warning in made.warnings)
    share = made.focal_length_px / true.focal_length_px - 1
    assert abs(share) < 4 * made.focal_length_px_sd / made.focal_length_px


def test_scales_that_are_not_ruled_alike_are_not_mixed() -> None:
    true = truth()
    level = marks(true)
    other = replace(
        level,
        place_px=level.place_px[:, ::-1] / 2,
        cov_px2=4 * level.cov_px2,
        mark_turn_rad=math.pi / 2,
        turn_rad=math.pi / 2,
    )
    made = calibrate_graduation(Graduation(level, other), means(true), Camera(*SIZE))
    assert made.focal_length_px == pytest.approx(true.focal_length_px, rel=1e-9)
    assert made.n == len(level.numbers)
    assert any("20 px apart" in w and "upright one was left out" in w for w in made.warnings)


def test_refusals_name_the_remedy() -> None:
    true = truth()
    level = marks(true)
    for seen, camera, given, options, says in (
        (Graduation(None, None), Camera(*SIZE), means(true), {}, "no graduated scale.*focus"),
        (
            Graduation(marks(true, count=1), None),
            Camera(*SIZE),
            means(true),
            {},
            "only 3 marks of the level scale.*into view",
        ),
        (
            Graduation(level, None),
            Camera(*SIZE, 3.45),
            means(true),
            {"own_lens": True},
            "lens of its own.*take pixel_um out",
        ),
        (
            Graduation(level, None),
            Camera(*SIZE, 3.45),
            division(spacing_um=100.0, focal_length_mm=300.0),
            {},
            "marks are 69 µm apart, where spacing_um is 100.*own_lens",
        ),
    ):
        with pytest.raises(BadInput, match=says) as refusal:
            calibrate_graduation(seen, given, camera, **options)
        assert "\n" not in str(refusal.value)
