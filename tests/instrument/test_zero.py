"""Setting a zero: at the average, and only when there is one to be trusted."""

from __future__ import annotations

import numpy as np
import pytest

from readout.errors import NotNow
from readout.instrument.averaging import Statistic, average_of
from readout.instrument.zero import Zero, travel, zero_from
from readout.model import Quality, Reading
from tests.instrument.fakes import reading, unmeasured

SEED = 5


def zero_of(rows: list[Reading]) -> Zero:
    return zero_from(rows, window_s=1.0, statistic=Statistic.MEAN, now_utc_ns=7)


def noisy(rate_arcsec_per_s: float = 0.0, sd: float = 0.05, n: int = 30) -> list[Reading]:
    rng = np.random.default_rng(SEED)
    return [
        reading(k, 10 + rate_arcsec_per_s * k / 30 + e, -3.0 + f, t_s=k / 30)
        for k, (e, f) in enumerate(rng.normal(0, sd, (n, 2)))
    ]


def test_the_zero_is_the_average_with_its_error_and_count() -> None:
    rows = noisy()
    average, zero = average_of(rows, window_s=1.0), zero_of(rows)
    assert (zero.x_arcsec, zero.y_arcsec) == (average.x_arcsec, average.y_arcsec)
    assert (zero.x_sd_arcsec, zero.n, zero.set_utc_ns) == (average.x_se_arcsec, 30, 7)


@pytest.mark.parametrize("rate_arcsec_per_s", [-1.0, 1.0, 100.0])
def test_refused_while_the_mirror_moves(rate_arcsec_per_s: float) -> None:
    with pytest.raises(NotNow, match="moving"):
        zero_of(noisy(rate_arcsec_per_s))


def test_slow_drift_and_shaking_do_not_hinder() -> None:
    assert zero_of(noisy(rate_arcsec_per_s=0.1, sd=0.001)).n == 30
    assert zero_of(noisy(rate_arcsec_per_s=1.0, sd=1.0)).n == 30


def test_refused_while_the_newest_reading_is_flagged() -> None:
    with pytest.raises(NotNow, match="saturated"):
        zero_of([*noisy(), reading(30, 10.0, -3.0, quality=Quality.SATURATED)])


def test_refused_while_fewer_than_half_are_good() -> None:
    with pytest.raises(NotNow, match="half"):
        zero_of([*(unmeasured(k) for k in range(5)), reading(5)])


def test_refused_without_any_reading_or_any_scale() -> None:
    with pytest.raises(NotNow, match="no reading"):
        zero_of([])
    with pytest.raises(NotNow, match="no scale"):
        zero_of([reading(0, float("nan"), float("nan"))])


def test_travel_of_a_straight_line() -> None:
    t_s = np.linspace(5.0, 7.0, 21)
    way, scatter = travel(t_s, 3.0 * t_s - 1.0)
    assert way == pytest.approx(6.0)  # 3 a second for 2 s
    assert scatter == pytest.approx(0.0, abs=1e-9)
