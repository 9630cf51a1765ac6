"""A ruled scale as drawn, against plain rectangles blurred and averaged on a fine grid by scipy."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from scipy.ndimage import gaussian_filter

from readout.angle.nominal import nominal_calibration
from readout.simulation.graduation import Ruling, ruled_share

SHAPE = (40, 60)
FINE = 12


def truth(rotation_deg: float = 0.0, k1: float = 0.0):
    made = nominal_calibration(
        focal_length_mm=300.0,
        pitch_um=3.0,
        image_width_px=SHAPE[1],
        image_height_px=SHAPE[0],
        rotation_deg=rotation_deg,
    )
    return replace(made, k1=k1)


@pytest.mark.parametrize("rotation_deg", [0.0, 17.0])
@pytest.mark.parametrize("upright", [False, True])
@pytest.mark.parametrize("line", [False, True])
def test_is_blurred_rectangles(rotation_deg: float, upright: bool, line: bool) -> None:
    made = truth(rotation_deg)
    ruling = Ruling(
        12.0 / made.focal_length_px,
        first=-2,
        last=2,
        missing=(1,),
        at_div=0.1,
        phase_div=0.3,
        axis_line=line,
    )
    share = ruled_share(SHAPE, made, ruling, upright=upright)
    fine = (np.arange(-FINE * 10, FINE * 70) + 0.5) / FINE - 0.5
    x, y = np.meshgrid(fine, fine)
    along, across = made.slopes(x, y)[:: -1 if upright else 1]
    along = along / ruling.division_slope - 0.3
    across = across / ruling.division_slope - 0.1
    half = 1.0 / 12.0
    hard = np.full(along.shape, line) & (np.abs(across) < half) & (np.abs(along) < 2 + half)
    for number, length in ((-2, 0.3), (-1, 0.3), (0, 0.6), (2, 0.3)):
        hard |= (np.abs(along - number) < half) & (np.abs(across) < length)
    soft = gaussian_filter(hard.astype(np.float64), FINE * ruling.blur_px)
    start = FINE * 10
    whole = soft[start : start + FINE * SHAPE[0], start : start + FINE * SHAPE[1]]
    mean = whole.reshape(SHAPE[0], FINE, SHAPE[1], FINE).mean(axis=(1, 3))
    # Where the line ends on a mark, the union of blurred bars is not the blurred union.
    columns, rows = np.arange(SHAPE[1]), np.arange(SHAPE[0])[:, None]
    at = made.slopes(columns + 0.0 * rows, rows + 0.0 * columns)[int(upright)]
    inner = np.abs(at / ruling.division_slope - 0.3) < 1.5
    apart = np.abs(share - mean)
    # A fine grid of 12 a pixel places edges to 1/24 px; the steepest flank rises 0.4 a pixel.
    assert apart[inner].max() < 0.4 / 24
    if not line:
        assert apart.max() < 0.4 / 24
    assert share.max() > 0.6


def test_marks_lie_where_the_calibration_says_through_a_bent_lens() -> None:
    made = truth(k1=3e5)
    ruling = Ruling(12.0 / made.focal_length_px, first=-2, last=2, axis_line=False)
    share = ruled_share(SHAPE, made, ruling)
    row = share[19] + share[20]
    for number in ruling.marks():
        x, _ = made.position(-0.5 * 206264.806 * np.arctan(number * ruling.division_slope), 0.0)
        near = np.arange(max(0, round(float(x)) - 4), min(60, round(float(x)) + 5))
        centroid = float(row[near] @ near / row[near].sum())
        assert centroid == pytest.approx(float(x), abs=0.02)


def test_refuses_what_cannot_be() -> None:
    with pytest.raises(ValueError, match="positive"):
        Ruling(0.0)
