"""The check with two tilts: a known defocus is found beneath a way that pitches by far more."""

import functools
import json
import math

import numpy as np
import pytest
from scipy import stats

from readout.angle.distance_fit import check_distance
from readout.angle.distance_rows import DistanceRow, distance_rows
from readout.errors import BadInput
from tests.angle.traced_distance import traced_reading

FOCAL_MM = 300.0
DISTANCES_MM = (300.0, 700.0, 1100.0, 1500.0, 1900.0)
LOW, HIGH = -300.0, 300.0


@functools.cache
def gains(defocus_mm, distances_mm=DISTANCES_MM):
    """Traced reading per tilt at each distance: a mirror of 12 mm, the return unclipped.

    The trace is in proportion to the tilt to 1e-4 at these angles, so that one at 400" serves.
    """
    return np.array(
        [
            traced_reading(400.0, distance, defocus_mm=defocus_mm, mirror_mm=12.0, across=401)[0]
            / 400.0
            for distance in distances_mm
        ]
    )


def measured(gain, rng, *, noise, way=20.0, step_sd=0.0, told=None, distances_mm=DISTANCES_MM):
    """Rows of one walk along the way, and the way's tilt at each stop."""
    pitch = rng.uniform(-way, way, len(distances_mm))
    rows = []
    for distance, g, bend in zip(distances_mm, gain, pitch, strict=True):
        for name, tilt in (("low", LOW), ("high", HIGH + rng.normal(0, step_sd))):
            x = g * (tilt + bend) + rng.normal(0, noise)
            rows.append(DistanceRow(distance, name, x, math.nan, told or math.nan))
    return rows, pitch


@pytest.mark.parametrize("defocus_mm", [1.0, -0.7, 0.0])
def test_without_noise_the_traced_defocus_is_found(defocus_mm):
    rows, pitch = measured(gains(defocus_mm), np.random.default_rng(1), noise=0.0)
    found = check_distance(rows, focal_length_mm=FOCAL_MM)
    assert found.defocus_mm == pytest.approx(defocus_mm, abs=0.01)
    # The way's tilt keeps what the readings keep at the first station, the scale (1 + d / f).
    way = [station.way_x_arcsec for station in found.stations]
    assert way == pytest.approx(pitch - pitch[0], abs=0.02 + 40 * abs(defocus_mm) / FOCAL_MM)


@pytest.mark.parametrize("told", [0.1, None], ids=["sd known", "sd from scatter"])
def test_one_millimetre_is_found_though_the_way_pitches(told):
    """Bias, spread and honesty over 400 walks; the way pitches by +-20", the noise is 0.1"."""
    truth, walks, gain = 1.0, 400, gains(1.0)
    found = [
        check_distance(
            measured(gain, np.random.default_rng([2, k]), noise=0.1, told=told)[0],
            focal_length_mm=FOCAL_MM,
        )
        for k in range(walks)
    ]
    error = np.array([f.defocus_mm for f in found]) - truth
    # What a straight line through five differences must scatter (0.1" twice, 600", 300 mm).
    spread = np.std(DISTANCES_MM) * math.sqrt(len(DISTANCES_MM))
    expected = FOCAL_MM**2 * 0.1 * math.sqrt(2) / (HIGH - LOW) / spread
    assert abs(error.mean()) < 4 * expected / math.sqrt(walks) + 0.003
    assert error.std() == pytest.approx(expected, rel=4 / math.sqrt(2 * walks))
    claimed_95 = np.mean(np.abs(error) <= [f.expanded_u_mm for f in found])
    assert abs(claimed_95 - 0.95) < 4 * math.sqrt(0.95 * 0.05 / walks)
    k = [stats.t.ppf(0.8413, f.freedom) if math.isfinite(f.freedom) else 1 for f in found]
    claimed_68 = np.mean(np.abs(error) <= np.multiply(k, [f.defocus_u_mm for f in found]))
    assert abs(claimed_68 - 0.6827) < 4 * math.sqrt(0.68 * 0.32 / walks)


def test_one_tilt_alone_would_be_misled_by_the_way():
    """The slope of single readings over the tilt: wrong by more than what it looks for."""
    gain, error = gains(1.0), []
    for k in range(50):
        rows, _ = measured(gain, np.random.default_rng([2, k]), noise=0.1)
        high = [row.x_arcsec for row in rows if row.step == "high"]
        error.append(-np.polyfit(DISTANCES_MM, high, 1)[0] / HIGH * FOCAL_MM**2 - 1.0)
    assert np.std(error) > 1.0


def test_the_ways_own_tilt_is_kept_apart_and_its_uncertainty_holds():
    walks, inside, gain = 200, [], gains(1.0)
    for k in range(walks):
        rows, pitch = measured(gain, np.random.default_rng([3, k]), noise=0.1, told=0.1)
        for station, bend in zip(
            check_distance(rows, focal_length_mm=FOCAL_MM).stations[1:], pitch[1:], strict=True
        ):
            true = (bend - pitch[0]) * gain[0]
            inside.append(abs(station.way_x_arcsec - true) <= station.way_x_u_arcsec)
    # Four stations of a walk share its first, so that they are worth less than four.
    assert abs(np.mean(inside) - 0.683) < 4 * math.sqrt(0.68 * 0.32 / walks)


def test_a_step_that_does_not_repeat_widens_the_claim():
    """Steps repeat to 1", the rows claim 0.1": the interval still covers."""
    walks, inside, widened, gain = 200, 0, 0, gains(1.0)
    for k in range(walks):
        rows, _ = measured(gain, np.random.default_rng([4, k]), noise=0.1, step_sd=1.0, told=0.1)
        found = check_distance(rows, focal_length_mm=FOCAL_MM)
        inside += abs(found.defocus_mm - 1.0) <= found.expanded_u_mm
        widened += any("may not repeat" in line for line in found.warnings)
    assert widened > 0.95 * walks
    assert inside / walks > 0.95 - 4 * math.sqrt(0.95 * 0.05 / walks)


def test_a_step_along_both_axes_counts_whole():
    rows = [
        DistanceRow(distance, name, 0.6 * g * tilt, 0.8 * g * tilt, 0.1)
        for distance, g in zip(DISTANCES_MM, gains(1.0), strict=True)
        for name, tilt in (("low", LOW), ("high", HIGH))
    ]
    found = check_distance(rows, focal_length_mm=FOCAL_MM)
    assert found.defocus_mm == pytest.approx(1.0, abs=0.01)
    assert found.step_arcsec == pytest.approx(600.0, rel=0.01)


def test_an_uncertain_focal_length_counts_twice_over():
    """The defocus goes with its square."""
    rows, _ = measured(gains(1.0), np.random.default_rng(5), noise=0.0, told=1e-6)
    found = check_distance(rows, focal_length_mm=FOCAL_MM, focal_length_sd_mm=3.0)
    assert found.defocus_u_mm == pytest.approx(0.02, rel=0.03)


def test_what_is_said_and_written():
    rows, _ = measured(gains(1.0), np.random.default_rng(6), noise=0.05, told=0.05)
    found = check_distance(rows, focal_length_mm=FOCAL_MM)
    where, effect, way = found.words()
    assert "beyond the focal plane" in where
    assert "move it towards the objective by as much" in where
    assert "−6.6" in effect or "−6.7" in effect or "−6.5" in effect
    assert way.startswith("the way itself tilts the mirror by")
    document = json.loads(json.dumps(found.document(), allow_nan=False))
    assert document["schema"] == "readout.distance_check/1"
    assert document["stations"][0]["way_y_arcsec"] is None
    assert document["freedom"] is None  # known beforehand: no scatter was asked
    assert any("clipped" in line for line in document["warnings"])


def test_a_sensor_in_focus_is_said_to_be():
    rows, _ = measured(gains(0.0), np.random.default_rng(7), noise=0.1, told=0.1)
    found = check_distance(rows, focal_length_mm=FOCAL_MM, objective_mm=40, mirror_mm=12)
    assert found.in_focus
    assert "lies in the focal plane to within ±" in found.words()[0]
    assert found.warnings == ()


def test_a_stop_that_is_off_is_named():
    rows, _ = measured(gains(1.0), np.random.default_rng(8), noise=0.05, told=0.05)
    for number, row in enumerate(rows):
        if row.distance_mm == 1100.0 and row.step == "high":
            rows[number] = DistanceRow(row.distance_mm, row.step, row.x_arcsec + 50, math.nan, 0.05)
    found = check_distance(rows, focal_length_mm=FOCAL_MM)
    assert any("may not repeat" in line for line in found.warnings)
    assert any("the difference at 1100 mm is" in line for line in found.warnings)
    unknown = [DistanceRow(row.distance_mm, row.step, row.x_arcsec) for row in rows]
    found = check_distance(unknown, focal_length_mm=FOCAL_MM)
    assert any("the difference at 1100 mm is" in line for line in found.warnings)


@pytest.mark.parametrize("told", [0.1, None], ids=["sd known", "sd from scatter"])
def test_a_good_stop_is_seldom_named(told):
    """Once in a hundred checks by chance; the limit is three standard errors above."""
    walks, gain = 600, gains(1.0)
    named = sum(
        any("read this distance again" in line for line in found.warnings)
        for found in (
            check_distance(
                measured(gain, np.random.default_rng([10, k]), noise=0.1, told=told)[0],
                focal_length_mm=FOCAL_MM,
            )
            for k in range(walks)
        )
    )
    assert named <= 0.01 * walks + 3 * math.sqrt(0.01 * walks)


def good_rows():
    return measured(gains(1.0), np.random.default_rng(9), noise=0.1, told=0.1)[0]


def test_clipped_rows_are_refused_by_number():
    with pytest.raises(BadInput, match=r"row 5 was taken at \d+″, but at 1100 mm .* narrower stop"):
        check_distance(good_rows(), focal_length_mm=FOCAL_MM, objective_mm=30, mirror_mm=25)


@pytest.mark.parametrize(
    ("rows", "line"),
    [
        ([], "there are no rows"),
        (good_rows()[:2], "all rows stand at 300 mm: move the mirror"),
        (good_rows()[:3], "row 3: at 700 mm the tilt 'high' is missing; read both"),
        (good_rows()[::2], "the tilts are called 'low': give every row one of just two names"),
        ([*good_rows(), DistanceRow(5.0, "middle", 0.0)], "'low', 'high', 'middle'"),
        (
            [DistanceRow(r.distance_mm, r.step, r.x_arcsec) for r in good_rows()[:4]],
            "two stops without sd_arcsec tell no uncertainty",
        ),
        (
            [*good_rows(), DistanceRow(5.0, "low", math.nan), DistanceRow(5.0, "high", 1.0)],
            "row 11 lacks a reading",
        ),
        (
            [DistanceRow(r.distance_mm, r.step, 0.001 * r.x_arcsec, 0, 0.1) for r in good_rows()],
            "too little for the noise",
        ),
    ],
)
def test_bad_rows_are_refused_in_one_line(rows, line):
    with pytest.raises(BadInput, match=line) as caught:
        check_distance(rows, focal_length_mm=FOCAL_MM)
    assert "\n" not in str(caught.value)


def test_no_defocus_makes_a_step_vanish_within_the_focal_length():
    rows = [
        DistanceRow(distance, name, tilt * (1 - distance / 280), math.nan, 0.1)
        for distance in (50.0, 100.0, 150.0)
        for name, tilt in (("low", LOW), ("high", HIGH))
    ]
    with pytest.raises(BadInput, match="check that the distances are in millimetres"):
        check_distance(rows, focal_length_mm=FOCAL_MM)


def test_a_focal_length_that_cannot_be():
    with pytest.raises(BadInput, match="focal length of 0 mm"):
        check_distance(good_rows(), focal_length_mm=0.0)


def test_rows_from_a_table_of_texts_or_numbers():
    rows = distance_rows(
        [
            {"distance_mm": "300", "step": "low", "x_arcsec": "-1.5", "y_arcsec": ""},
            {"distance_mm": 300, "step": "high", "x_arcsec": 2, "y_arcsec": 1.0, "sd_arcsec": 0.1},
        ]
    )
    assert rows[0].x_arcsec == -1.5
    assert math.isnan(rows[0].y_arcsec)
    assert math.isnan(rows[0].sd_arcsec)
    assert rows[1] == DistanceRow(300.0, "high", 2.0, 1.0, 0.1)


@pytest.mark.parametrize(
    ("cells", "line"),
    [
        ({"step": ""}, "row 1: no step"),
        ({"distance_mm": "-3"}, "row 1: distance_mm must be the positive distance"),
        ({"distance_mm": ""}, "row 1: distance_mm must be the positive distance"),
        ({"x_arcsec": "far"}, "row 1: x_arcsec is 'far', which is no number"),
        ({"x_arcsec": "inf"}, "row 1: x_arcsec is 'inf', which is no number"),
        ({"x_arcsec": True}, "row 1: x_arcsec is 'True', which is no number"),
        ({"sd_arcsec": 0}, "row 1: sd_arcsec must be positive, or empty"),
    ],
)
def test_a_bad_cell_is_named(cells, line):
    whole = {"distance_mm": 300, "step": "low", "x_arcsec": 0.0, "y_arcsec": 0.0, "sd_arcsec": 0.1}
    with pytest.raises(BadInput, match=line):
        distance_rows([whole | cells])
