"""Drift of a record against published values, exact properties, and how often it holds."""

import json
import math

import numpy as np
import pytest

from readout.errors import BadInput
from readout.stability import TiltSeries, drift_document, drift_of, floor_of_null_test

NINE = np.array([892.0, 809, 823, 798, 671, 644, 883, 903, 677])
"""NBS Monograph 140, annex 8.E, as in W. J. Riley, NIST SP 1065 (2008), table 30."""


def document(t, x, y=None, flagged=0, floor=None):
    t, x = np.asarray(t, dtype=float), np.asarray(x, dtype=float)
    series = TiltSeries(t, x, x if y is None else np.asarray(y, dtype=float), flagged)
    return drift_document(drift_of(series), floor)


def test_nine_points_of_nbs_monograph_140():
    """Allan deviations and sd as published; slope and mean as of that table (from memory)."""
    found = document(np.arange(9), NINE)
    assert found["x_mean_arcsec"] == pytest.approx(788.8889, abs=5e-5)
    assert found["x_sd_arcsec"] == pytest.approx(100.9770, abs=5e-5)
    assert found["x_range_arcsec"] == 903 - 644
    assert found["x_rate_arcsec_per_h"] == pytest.approx(-10.2 * 3600, rel=1e-9)
    allan = found["allan"]
    assert allan["tau_s"] == [1, 2, 3]
    assert allan["n"] == [8, 6, 4]
    assert allan["x_arcsec"][:2] == pytest.approx([91.22945, 85.95287], rel=1e-6)
    assert allan["y_arcsec"] == allan["x_arcsec"]


def test_a_thousand_points_of_sp_1065():
    """Table 32: the generator n = 16807 n mod 2147483647, started at 1234567890; every 2 s."""
    n, values = 1234567890, []
    for _ in range(1000):
        values.append(n / 2147483647)
        n = 16807 * n % 2147483647
    allan = document(2.0 * np.arange(1000), values)["allan"]
    at = [allan["tau_s"].index(tau) for tau in (2, 20, 200)]
    published = [2.922319e-1, 9.159953e-2, 3.241343e-2]
    # 1e-6 relative, and half of the last of the six decimals a document has.
    assert [allan["x_arcsec"][k] for k in at] == pytest.approx(published, rel=1e-6, abs=6e-7)
    assert [allan["n"][k] for k in at] == [999, 981, 801]


def test_the_rate_of_a_straight_line_is_its_slope_whatever_the_times():
    t = np.cumsum(np.random.default_rng(1).uniform(0.5, 1.5, 500)) + 1e5
    found = document(t, 12.0 + 0.6 * t / 3600, -0.3 * t / 3600)
    assert found["x_rate_arcsec_per_h"] == pytest.approx(0.6, abs=1e-6)
    assert found["y_rate_arcsec_per_h"] == pytest.approx(-0.3, abs=1e-6)
    assert found["x_rate_sd_arcsec_per_h"] < 1e-6


def chained(rng, n, rho):
    """Each value ``rho`` of the one before and a new one; of standard deviation 1 for rho = 0."""
    values = rng.standard_normal(n)
    for k in range(1, n):
        values[k] += rho * values[k - 1]
    return values


@pytest.mark.parametrize("rho", [0.0, 0.9], ids=["independent", "hangs together for ten readings"])
def test_the_rates_uncertainty_is_that_of_its_scatter(rho):
    """Rates over 400 records; for independent readings sigma sqrt(12 / n) / T (a line's slope)."""
    runs, n = 400, 600
    rng = np.random.default_rng(2)
    t = np.arange(float(n))
    rates, claimed = [], []
    for _ in range(runs):
        found = drift_of(TiltSeries(t, chained(rng, n, rho), np.zeros(n)))
        rates.append(found.x.rate_arcsec_per_h)
        claimed.append(found.x.rate_sd_arcsec_per_h)
    true, said = np.std(rates), np.sqrt(np.mean(np.square(claimed)))
    own = 4 / math.sqrt(2 * runs)
    if rho == 0:
        line = math.sqrt(12 / n) / (n / 3600)
        assert true == pytest.approx(line, rel=own)
        # Of records without it, one in twenty is taken for one that hangs together, twice over.
        assert 0.97 < said / line < 1.1
    # Noise that hangs together is seen from a few blocks, so it is told less closely, and low.
    assert 1 - 0.2 - own < said / true < 1.1 + own
    inside = np.mean(np.abs(rates) < np.array(claimed))
    print(f"rho {rho}: {inside:.3f} within one, said/true {said / true:.3f}")
    assert inside > 0.683 - 0.08 - 4 * math.sqrt(0.683 * 0.317 / runs)


def test_a_gap_splits_the_record():
    """The differences of both halves, as they are of each alone, and none across."""
    rng = np.random.default_rng(3)
    first, second = rng.standard_normal(300), 50 + rng.standard_normal(300)
    t = np.concatenate([np.arange(300.0), 1000 + np.arange(300.0)])
    found = document(t, np.concatenate([first, second]))
    assert (found["gaps"], found["longest_gap_s"]) == (1, 701.0)
    alone = [document(np.arange(300.0), half)["allan"] for half in (first, second)]
    for k, tau in enumerate(found["allan"]["tau_s"]):
        if tau >= 100:
            continue
        parts = [one["tau_s"].index(tau) for one in alone]
        n = [one["n"][p] for one, p in zip(alone, parts, strict=True)]
        square = [one["x_arcsec"][p] ** 2 for one, p in zip(alone, parts, strict=True)]
        assert found["allan"]["n"][k] == sum(n)
        assert found["allan"]["x_arcsec"][k] == pytest.approx(
            math.sqrt(np.dot(n, square) / sum(n)), rel=1e-4
        )


def test_three_steps_are_no_gap_and_four_are():
    t = np.arange(40.0)
    assert document(np.delete(t, [10, 11]), np.zeros(38))["gaps"] == 0
    assert document(np.delete(t, [10, 11, 12]), np.zeros(37))["gaps"] == 1


def test_uneven_rows_are_binned_at_the_median_interval():
    rng = np.random.default_rng(4)
    t = np.arange(2000) * 0.5 + rng.uniform(-0.1, 0.1, 2000)
    found = document(t, rng.standard_normal(2000))
    assert found["interval_s"] == pytest.approx(0.5, abs=0.02)
    assert found["gaps"] == 0
    assert found["allan"]["x_arcsec"][0] == pytest.approx(1.0, rel=0.1)


def test_an_axis_without_readings_is_null_and_the_other_stands():
    found = document(np.arange(9), NINE, np.full(9, np.nan))
    assert found["x_n"], found["y_n"] == (9, 0)
    assert found["y_rate_arcsec_per_h"] is None
    assert found["allan"]["y_lo_arcsec"] == [None] * 3
    assert found["allan"]["x_arcsec"][0] == pytest.approx(91.22945, rel=1e-6)
    json.dumps(found, allow_nan=False)


def test_the_interval_holds_the_deviation_and_widens_with_tau():
    allan = document(np.arange(900), np.random.default_rng(5).standard_normal(900))["allan"]
    low, middle, high = (np.array(allan[f"x{part}_arcsec"]) for part in ("_lo", "", "_hi"))
    assert np.all((low < middle) & (middle < high))
    assert np.all(np.diff(high / low) > 0)


def test_a_drift_below_the_floor_is_not_claimed():
    rng = np.random.default_rng(6)
    t = np.arange(3600.0)
    null = floor_of_null_test(t, *(0.05 * rng.standard_normal(3600) for _ in range(2)))
    x, y = (0.05 * rng.standard_normal(1800) for _ in range(2))
    claims = document(t[:1800], x + t[:1800] / 3600, y, floor=null)["claims"]
    assert [claim["verdict"] for claim in claims] == ["claimed", "within_floor"]
    assert claims[0]["change_arcsec"] == pytest.approx(0.5, abs=0.02)
    assert "no drift is claimed" in claims[1]["words"]


@pytest.mark.parametrize(
    ("t", "x", "line"),
    [
        ([0.0, 1.0], [1.0, 2.0], "2 readings are no series"),
        ([0.0, 1.0, 1.0], [1.0, 2.0, 3.0], "row 3: its time is not after"),
        ([0.0, 1.0, 2.0], [1.0, np.nan, np.nan], r"of 3 rows fewer than three .*\(2 have"),
    ],
)
def test_a_record_that_is_none(t, x, line):
    with pytest.raises(BadInput, match=line):
        document(t, x, flagged=2)
