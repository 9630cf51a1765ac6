"""Frame rate and frame time from arrival times laid out by hand."""

from __future__ import annotations

import pytest

from readout.instrument.pace import Pace


def arrivals(*times_s: float) -> Pace:
    pace = Pace()
    for t_s in times_s:
        pace.add(round(t_s * 1e9))
    return pace


def test_nothing_is_known_from_one_frame() -> None:
    pace = arrivals(1.0)
    assert pace.interval_s is None
    assert pace.per_s(round(1.1e9)) == 0.0


def test_an_even_rate() -> None:
    pace = arrivals(*(k / 30 for k in range(300)))
    assert pace.per_s(round(299 / 30 * 1e9)) == pytest.approx(30.0, rel=1e-6)
    assert pace.interval_s == pytest.approx(1 / 30, rel=1e-6)


def test_one_late_frame_does_not_move_the_frame_time() -> None:
    assert arrivals(0.0, 0.1, 0.2, 0.9, 1.0, 1.1).interval_s == pytest.approx(0.1)


def test_the_rate_falls_to_nothing_in_silence() -> None:
    pace = arrivals(*(k / 10 for k in range(50)))  # the last at 4.9 s
    rates = [pace.per_s(round(t_s * 1e9)) for t_s in (4.9, 5.9, 6.8, 7.0)]
    assert rates == sorted(rates, reverse=True)
    assert rates[-1] == 0.0
