"""Setting a zero: at the average, and only when there is one to be trusted."""

from __future__ import annotations

import numpy as np
import pytest

from readout.errors import NotNow
from readout.instrument.averaging import Rows, average_of
from readout.instrument.stillness import moving, travel
from readout.instrument.zero import Zero, zero_from
from readout.model import F64, Quality, Reading
from readout.simulation import Motion
from tests.instrument.fakes import reading, unmeasured

SEED = 5


def zero_of(rows: list[Reading]) -> Zero:
    columns = Rows.of(rows)
    return zero_from(rows[-1], columns, average_of(columns, window_s=1.0), now_utc_ns=7)


def of(x_arcsec: F64, *, sd: float = 0.02) -> list[Reading]:
    """Thirty a second."""
    return [reading(k, x, -3.0, t_s=k / 30, sd=sd) for k, x in enumerate(x_arcsec.tolist())]


def noisy(rate_arcsec_per_s: float = 0.0, sd: float = 0.05, n: int = 30) -> list[Reading]:
    noise = np.random.default_rng(SEED).normal(0, sd, n)
    return of(10 + rate_arcsec_per_s * np.arange(n) / 30 + noise, sd=sd)


def test_the_zero_is_the_average_with_its_error_and_count() -> None:
    rows = noisy()
    average, zero = average_of(Rows.of(rows), window_s=1.0), zero_of(rows)
    assert (zero.x_arcsec, zero.y_arcsec) == (average.x_arcsec, average.y_arcsec)
    assert (zero.x_sd_arcsec, zero.n, zero.set_utc_ns) == (average.x_se_arcsec, 30, 7)


@pytest.mark.parametrize("rate_arcsec_per_s", [-1.0, 1.0, 100.0])
def test_refused_while_the_mirror_moves(rate_arcsec_per_s: float) -> None:
    with pytest.raises(NotNow, match="moving"):
        zero_of(noisy(rate_arcsec_per_s))


K = np.arange(30)
MOTIONS = {
    "jump in the last frame": np.where(K == 29, 500.0, 0.0),
    "jump three frames ago": np.where(K >= 27, 1000.0, 0.0),
    "jump of 2 arcsec three frames ago": np.where(K >= 27, 2.0, 0.0),
    "jump at the beginning": np.where(K < 3, 2.0, 0.0),
    "jump in the middle": np.where(K < 15, 0.5, 0.0),
    "one frame off": np.where(K == 11, 500.0, 0.0),
    "swing of 3 Hz": 100 * np.cos(2 * np.pi * 3 * K / 30),
    "swing of 1 Hz": 100 * np.cos(2 * np.pi * K / 30),
    "shaking of 1 arcsec": np.random.default_rng(SEED).normal(0, 1.0, 30),
}


@pytest.mark.parametrize("motion", MOTIONS)
def test_no_motion_hides_behind_its_own_size(motion: str) -> None:
    noise = np.random.default_rng(SEED).normal(0, 0.02, 30)
    for sign in (1, -1):
        with pytest.raises(NotNow, match="moving"):
            zero_of(of(10 + sign * MOTIONS[motion] + noise))


def test_a_jump_in_a_window_of_three_readings_is_seen() -> None:
    with pytest.raises(NotNow, match="moving"):
        zero_of(of(np.array([0.0, 0.0, 50.0])))


def test_slow_drift_and_the_sway_of_a_bench_do_not_hinder() -> None:
    assert zero_of(noisy(rate_arcsec_per_s=0.1, sd=0.001)).n == 30
    sway = 0.2 * np.sin(2 * np.pi * 2.5 * K / 30 + 1.0)
    assert zero_of(of(10 + sway)).n == 30


def test_a_noisy_camera_that_says_so_does_not_hinder() -> None:
    assert zero_of(noisy(sd=2.0)).n == 30


def test_the_simulated_bench_gives_a_zero_most_of_the_time() -> None:
    """Its mirror is bumped every 30 s and rings for some seconds: then a refusal is right."""
    t_s = np.arange(0, 600, 1 / 30)
    x, y = Motion(seed=SEED).tilt(t_s)
    print(f"seed {SEED}")
    refused = []
    for begin in range(0, t_s.size - 30, 30):
        part = slice(begin, begin + 30)
        columns = zip(t_s[part].tolist(), x[part].tolist(), y[part].tolist(), strict=True)
        refused.append(moving(Rows.of(reading(0, a, b, t_s=t, sd=0.02) for t, a, b in columns)))
    assert 0.01 < np.mean(refused) < 0.2


def test_refused_while_the_newest_reading_is_flagged() -> None:
    with pytest.raises(NotNow, match="saturated"):
        zero_of([*noisy(), reading(30, 10.0, -3.0, quality=Quality.SATURATED)])


def test_refused_while_fewer_than_half_are_good() -> None:
    with pytest.raises(NotNow, match="half"):
        zero_of([*(unmeasured(k) for k in range(5)), reading(5)])


def test_refused_without_any_scale() -> None:
    with pytest.raises(NotNow, match="no scale"):
        zero_of([reading(0, float("nan"), float("nan"))])


def test_travel_of_a_straight_line() -> None:
    t_s = np.linspace(5.0, 7.0, 21)
    assert travel(t_s, 3.0 * t_s - 1.0) == pytest.approx(6.0)  # 3 a second for 2 s
