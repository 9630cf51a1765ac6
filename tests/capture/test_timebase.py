"""UTC counted on from one anchor."""

from __future__ import annotations

import time

from readout.capture.timebase import TimeBase


def test_the_tightest_of_five_looks_is_kept():
    """A pause of 1 ms falls into all looks but the fourth."""
    gaps = iter([0, 10**6, 10, 10**6, 10, 10**6, 10, 400, 10, 10**6])
    now = [0]

    def clock() -> int:
        now[0] += next(gaps)
        return now[0]

    anchor = TimeBase.now(clock, lambda: now[0] + 7_000)
    # before the fourth look: 3 pauses of 1 ms and 3 gaps of 10 ns; the middle is 200 ns on
    assert anchor.t_mono_ns == 3 * 10**6 + 30 + 200
    assert anchor.utc_ns(anchor.t_mono_ns + 5) - anchor.t_utc_ns == 5


def test_agrees_with_the_clocks_of_the_machine():
    anchor = TimeBase.now()
    apart_ns = abs(anchor.utc_ns(time.monotonic_ns()) - time.time_ns())
    assert apart_ns < 10**9  # a stepped clock or a stopped machine aside
