"""Two scales against each other: agreement, factors of two, and the rest."""

from dataclasses import replace

import numpy as np
import pytest

from readout.angle import TiltSet, nominal_calibration
from readout.angle.lever import LeverRow, lever_tilts
from readout.angle.scales import (
    Ratio,
    compare_scales,
    judge_ratio,
    ratio_of_steps,
    refuse_factor_of_two,
)
from readout.errors import BadInput


def scale(focal_length_mm, rel_sd=1e-3):
    return nominal_calibration(
        focal_length_mm=focal_length_mm,
        pitch_um=3.45,
        image_width_px=640,
        image_height_px=480,
        focal_length_rel_sd=rel_sd,
    )


@pytest.mark.parametrize(
    ("ratio", "ratio_u", "says"),
    [
        (1.0, 1e-3, Ratio.AGREES),
        (1.0029, 1e-3, Ratio.AGREES),
        (1.0031, 1e-3, Ratio.DIFFERS),
        (0.5, 1e-3, Ratio.HALF),
        (2.05, 1e-3, Ratio.DOUBLE),
        (0.46, 1e-3, Ratio.HALF),
        (0.40, 1e-3, Ratio.DIFFERS),
        (0.40, 0.05, Ratio.HALF),
        (1.30, 1e-3, Ratio.DIFFERS),
        (1.30, 0.15, Ratio.AGREES),
    ],
)
def test_what_a_ratio_says(ratio, ratio_u, says):
    assert judge_ratio(ratio, ratio_u).says is says


def test_ratio_is_of_tilt_per_pixel_and_its_uncertainty_of_both():
    """Twice the focal length is half the tilt per pixel (theta = d / 2f)."""
    found = compare_scales(scale(600.0, 3e-3), scale(300.0, 4e-3))
    assert found.ratio == pytest.approx(0.5)
    assert found.ratio_u == pytest.approx(0.5 * 5e-3)
    assert found.says is Ratio.HALF


def test_a_factor_of_two_is_refused_by_name():
    lever = replace(scale(300.0), method="lever in x only")
    marks = replace(scale(150.0), method="graduation")
    with pytest.raises(BadInput, match=r"graduation against lever .*factor of 2.*beam angle"):
        refuse_factor_of_two(marks, lever)
    refuse_factor_of_two(lever, scale(301.0))
    refuse_factor_of_two(lever, scale(400.0))  # wrong, but not by a factor of two


def test_cameras_of_different_size_are_not_compared():
    with pytest.raises(BadInput, match="640 × 480 and the other for 800 × 480"):
        compare_scales(scale(300.0), replace(scale(300.0), image_width_px=800))


def steps(heights, taken_focal_mm, rel_sd=1e-3):
    """Lever steps of a mirror before a camera of 300 mm, turned by 30 degrees and mirrored."""
    made = lever_tilts(
        [LeverRow(f"{k}", 200.0, h, 1e-4 if h else 0.0, 1) for k, h in enumerate(heights)],
        lever_sd_mm=0.4,
    )
    true = np.nan_to_num(made.tilt_arcsec, nan=5.0) - np.array([0.0, 12.0])
    n = len(heights)
    truth = nominal_calibration(
        focal_length_mm=300.0,
        pitch_um=3.45,
        image_width_px=640,
        image_height_px=480,
        rotation_deg=30.0,
    )
    given = TiltSet(
        names=tuple(map(str, range(n))),
        position_px=np.stack(truth.position(true[:, 0], true[:, 1]), axis=1),
        position_cov_px2=np.tile([1e-6, 0.0, 1e-6], (n, 1)),
        tilt_arcsec=made.tilt_arcsec,
        sd_arcsec=made.sd_arcsec,
        shared=made.shared,
    )
    return ratio_of_steps(scale(taken_focal_mm, rel_sd), given)


@pytest.mark.parametrize(
    ("taken_mm", "says"), [(300.0, Ratio.AGREES), (600.0, Ratio.HALF), (150.0, Ratio.DOUBLE)]
)
def test_one_lever_step_tells_the_factor_whatever_the_axes(taken_mm, says):
    found = steps([0.0, 0.1], taken_mm)
    assert found.says is says
    assert found.ratio == pytest.approx(300.0 / taken_mm, rel=1e-5)
    # lever 0.4 / 200, block 1e-4 / 0.1, scale 1e-3, and the places: 2 mirror axes, 2 frames
    place = np.sqrt(4) * 1e-3 * 1.186 / 103.1 * 300.0 / taken_mm
    other = found.ratio * np.sqrt(2e-3**2 + 1e-3**2 + 1e-3**2)
    assert found.ratio_u == pytest.approx(np.hypot(place, other), rel=1e-2)


def test_without_a_step_there_is_nothing_to_tell():
    assert steps([0.1, 0.1], 300.0) is None
