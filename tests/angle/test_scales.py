"""Two scales against each other: agreement, factors of two, and the rest."""

from dataclasses import replace

import pytest

from readout.angle import nominal_calibration
from readout.angle.scales import Ratio, compare_scales, judge_ratio, refuse_factor_of_two
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
