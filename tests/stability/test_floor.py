"""The floor of a null test, and that nothing below it is claimed."""

import json
import math
from dataclasses import replace

import numpy as np
import pytest

from readout.errors import BadInput
from readout.stability import (
    Drift,
    claim_drift,
    claims,
    floor_document,
    floor_of_document,
    floor_of_null_test,
)

HOUR = np.arange(0, 3600.0)


def noise(rng, n, walk):
    """White noise of 0.05", and a random walk that makes ``walk`` arc-seconds in an hour."""
    return 0.05 * rng.standard_normal(n) + np.cumsum(rng.normal(0, walk / 60, n))


def floor(seed=1, t=HOUR, walk=0.0, drift_per_h=0.0):
    rng = np.random.default_rng(seed)
    x, y = (noise(rng, len(t), walk) + drift_per_h * t / 3600 for _ in range(2))
    return floor_of_null_test(t, x, y, created_utc="2026-01-01T00:00:00Z")


def test_the_noise_of_a_reading_is_that_of_the_series():
    found = floor()
    assert found.x.noise_sd_arcsec == pytest.approx(0.05, rel=4 / math.sqrt(2 * 3600))
    assert not found.x.drifts


def test_a_steady_drift_is_found_and_is_its_own_floor():
    """The instrument drifts 0.6" an hour: over half an hour it makes 0.3" by itself."""
    found = floor(drift_per_h=0.6)
    assert abs(found.x.drift_arcsec_per_h - 0.6) < 3 * found.x.drift_u_arcsec_per_h
    assert found.x.drifts
    assert found.change_arcsec(found.x, 1800.0)[0] == pytest.approx(0.3, rel=0.05)


def test_the_drifts_own_interval_holds():
    """Drift and uncertainty over 400 null tests of white noise."""
    runs, outside = 400, 0
    for k in range(runs):
        outside += floor([2, k], np.arange(0, 600.0)).x.drifts
    assert abs(outside / runs - 0.05) < 4 * math.sqrt(0.05 * 0.95 / runs)


def slope_change(t, values):
    """Drift over the series as a straight line shows it, with its uncertainty for white noise."""
    (rate, _), cov = np.polyfit(t, values, 1, cov=True)
    return rate * (t[-1] - t[0]), math.sqrt(cov[0, 0]) * (t[-1] - t[0])


@pytest.mark.parametrize("walk", [0.0, 0.3], ids=["white noise", "creeping mount"])
@pytest.mark.parametrize("over_s", [120, 600, 1800])
def test_an_instrument_that_alone_drifts_makes_no_claims(walk, over_s):
    """Null test and measurement of one and the same instrument, nothing else moving."""
    runs, false = 200, 0
    for k in range(runs):
        rng = np.random.default_rng([3, k])
        found = floor([4, k], walk=walk)
        t = np.arange(0, float(over_s))
        change, u = slope_change(t, noise(rng, over_s, walk))
        claim, _ = claim_drift(Drift(change, 0.0, float(over_s), u, 0.0), found)
        false += claim.verdict == "claimed"
    print(f"walk {walk}, {over_s} s: {false} false claims of {runs}")
    assert false / runs < 0.05 + 3 * math.sqrt(0.05 * 0.95 / runs)


def test_a_drift_well_above_the_floor_is_claimed():
    found = floor(5, walk=0.1)
    first, second = claim_drift(Drift(2.0, 0.001, 600.0), found)
    assert first.verdict == "claimed"
    assert 0.02 < first.limit_arcsec < 2.0
    assert second.verdict == "within_floor"


def test_the_floor_grows_with_time_where_the_mount_creeps():
    """Of a random walk the rms change grows with the root of time: over 200 null tests, the
    Allan variance of a walk of q arcsec^2/s is q tau / 3 (SP 1065, 3.2), so 4/3 q T here."""
    changes = []
    for k in range(200):
        rng = np.random.default_rng([6, k])
        walk = np.cumsum(rng.normal(0, 0.01, 3600))
        found = floor_of_null_test(HOUR, walk, walk)
        changes.append([found.change_arcsec(found.x, T)[0] for T in (256.0, 1024.0)])
    rms = np.sqrt(np.mean(np.square(changes), axis=0))
    expected = 0.01 * np.sqrt(np.array([256, 1024]) * 4 / 3)
    assert rms == pytest.approx(expected, rel=0.15)


def test_what_the_null_test_was_too_short_for_is_not_known():
    found = floor(7)
    assert found.longest_s == 2400.0
    (claim, _) = claim_drift(Drift(5.0, 5.0, 8 * 3600.0), found)
    assert claim.verdict == "unknown"
    assert claim.words(found) == (
        "x: a drift over 8 h cannot be held against a null test of 60 min: repeat the null test "
        "for 12 h or longer"
    )
    assert math.isnan(found.change_arcsec(found.x, 0.0)[0])


def test_no_drift_measured_is_no_claim():
    (claim, _) = claim_drift(Drift(math.nan, 0.0, 60.0), floor(8))
    assert claim.verdict == "unknown"


def test_it_is_said_in_words():
    found = floor(9, drift_per_h=0.6)
    first, x, _ = found.words()
    assert first == "null test of 60 min, 3600 readings"
    assert x.startswith("x: a single reading scatters by 0.0")
    assert "it drifts by +0." in x
    small, _ = claims(Drift(0.01, 0.0, 600.0), found)
    assert small.startswith("x: no drift is claimed: +0.01")
    large, _ = claims(Drift(-3.0, 0.0, 600.0), found)
    assert large.startswith("x: −3.0")
    assert "more than the instrument makes by itself" in large
    assert "longer ones gain nothing" in x  # the drift wins after about a minute
    quiet = floor(9)
    still = quiet.best(quiet.x)[1] == quiet.tau_s[-1]
    assert ("longer ones would hold better still" in quiet.words()[1]) == still


def test_it_is_kept_as_json():
    found = replace(floor(10, walk=0.1), calibration_id="c1")
    text = json.dumps(floor_document(found), allow_nan=False)
    assert floor_of_document(json.loads(text)) == found


@pytest.mark.parametrize(
    ("change", "line"),
    [
        ({"schema": "readout.floor/2"}, "no floor of the kind readout.floor/1"),
        ({"tau_s": [1.0, 2.0]}, "columns differ in length"),
        ({"duration_s": "long"}, "incomplete or damaged"),
        ({"x": {}}, "incomplete or damaged"),
        ({"n": None}, "incomplete or damaged"),
    ],
)
def test_a_damaged_document_is_refused(change, line):
    document = floor_document(floor(11)) | change
    with pytest.raises(BadInput, match=line):
        floor_of_document(document)
    with pytest.raises(BadInput, match="no floor"):
        floor_of_document([document])


def test_averaging_times_must_rise():
    document = floor_document(floor(11))
    document["tau_s"] = document["tau_s"][::-1]
    with pytest.raises(BadInput, match="do not rise"):
        floor_of_document(document)


def test_gaps_and_flagged_readings_are_borne():
    rng = np.random.default_rng(12)
    t = np.delete(HOUR, np.s_[1000:1500])
    x = 0.05 * rng.standard_normal(len(t))
    x[rng.random(len(t)) < 0.02] = np.nan
    found = floor_of_null_test(t, x, x)
    assert found.x.noise_sd_arcsec == pytest.approx(0.05, rel=0.06)
    assert not found.x.drifts


@pytest.mark.parametrize(
    ("t", "x", "line"),
    [
        (HOUR[:50], np.zeros(50), "50 readings are too few for a null test"),
        (HOUR, np.where(HOUR < 2000, np.nan, 0.0), "only 44% of the readings in x are good"),
        (HOUR[::-1], 0 * HOUR, "row 2: its time is not after"),
        (HOUR, np.where(HOUR % 2, np.nan, 0.0), "too many gaps to average over"),
    ],
)
def test_a_null_test_that_is_none(t, x, line):
    with pytest.raises(BadInput, match=line) as caught:
        floor_of_null_test(t, x, np.zeros(len(t)))
    assert "\n" not in str(caught.value)
