"""The feed: ten minutes kept, each viewer its own queue, what is lost counted."""

from __future__ import annotations

import asyncio
import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from readout.instrument import Event
from readout.service.feed import KEPT_S, Batch, Columns, Feed, thinned
from tests.instrument.fakes import reading, unmeasured


def test_rows_come_back_as_they_went_in() -> None:
    feed = Feed(capacity=100)
    for k in range(10):
        feed.append(reading(k, float(k), -float(k)) if k != 4 else unmeasured(k))
    rows = feed.rows(from_seq=3)
    assert rows["seq"].tolist() == list(range(3, 10))
    assert rows["y_arcsec"][0] == -3.0
    assert math.isnan(rows["x_arcsec"][1])
    assert rows["quality"].tolist() == [0, 1, 0, 0, 0, 0, 0]  # no_image is the first word
    assert feed.rows(from_seq=99)["seq"].size == 0
    assert Feed().rows()["seq"].size == 0


def test_the_oldest_rows_go_when_the_memory_is_full() -> None:
    feed = Feed(capacity=7)
    for k in range(20):
        feed.append(reading(k))
    assert feed.rows()["seq"].tolist() == list(range(13, 20))


def test_rows_older_than_ten_minutes_are_not_given_out() -> None:
    feed = Feed(capacity=100)
    for k, t_s in enumerate([0.0, 1.0, KEPT_S + 0.5, KEPT_S + 0.9]):
        feed.append(reading(k, t_s=t_s))
    assert feed.rows()["seq"].tolist() == [1, 2, 3]


def test_a_slow_viewer_loses_the_oldest_counts_them_and_stops_nobody() -> None:
    async def run() -> tuple[int, Batch, list[int], int]:
        feed = Feed(capacity=10_000)
        feed.attach(asyncio.get_running_loop())
        slow, quick = feed.subscribe(5), feed.subscribe(5)
        seen: list[int] = []
        for k in range(100):
            await asyncio.to_thread(feed.append, reading(k))
            seen += [r.seq for r in (await quick.next(1.0)).readings]
        batch = await slow.next(1.0)
        assert quick.dropped == 0
        feed.unsubscribe(slow)
        return slow.dropped, batch, seen, feed.dropped

    dropped, batch, seen_by_quick, total = asyncio.run(run())
    assert [r.seq for r in batch.readings] == [95, 96, 97, 98, 99]
    assert dropped == total == 95
    assert seen_by_quick == list(range(100))


def test_events_that_a_slow_viewer_loses_are_counted_too() -> None:
    async def run() -> tuple[int, int, list[Event]]:
        feed = Feed(capacity=10)
        feed.attach(asyncio.get_running_loop())
        slow = feed.subscribe(5)
        for k in range(103):
            slow.offer(Event(float(k), 0, "settings", "the settings were changed"))
        batch = await slow.next(1.0)
        before = feed.dropped
        feed.unsubscribe(slow)
        assert feed.dropped == before
        return slow.dropped_events, before, batch.events

    dropped, total, events = asyncio.run(run())
    assert dropped == total == 3
    assert [e.t_s for e in events] == list(range(3, 103))


def test_events_and_status_changes_reach_every_viewer() -> None:
    async def run() -> list[Batch]:
        feed = Feed(capacity=10)
        feed.attach(asyncio.get_running_loop())
        viewers = [feed.subscribe(5) for _ in range(2)]
        feed.announce(Event(0.0, 0, "lost", "gone"))
        feed.announce()
        await asyncio.sleep(0)
        return [await viewer.next(1.0) for viewer in viewers]

    for batch in asyncio.run(run()):
        assert [e.event for e in batch.events] == ["lost"]
        assert batch.status_changed


def test_silence_is_an_empty_batch_and_the_end_wakes_everybody() -> None:
    async def run() -> bool:
        feed = Feed(capacity=10)
        feed.attach(asyncio.get_running_loop())
        viewer = feed.subscribe(5)
        assert await viewer.next(0.0) == Batch()
        waiting = asyncio.create_task(viewer.next(30.0))
        await asyncio.sleep(0)
        feed.detach()
        await asyncio.wait_for(waiting, 1.0)
        feed.append(reading(0))  # goes nowhere, and harms nobody
        return viewer.closed and feed.subscribe(5).closed

    assert asyncio.run(run())


def columns(x: list[float], y: list[float]) -> Columns:
    n = len(x)
    made: Columns = {name: np.zeros(n) for name in ("t_s", "x_sd_arcsec")}
    made |= {"seq": np.arange(n), "x_arcsec": np.array(x), "y_arcsec": np.array(y)}
    return made


numbers = st.one_of(st.just(math.nan), st.floats(-1e3, 1e3))


@given(st.lists(st.tuples(numbers, numbers), max_size=400), st.integers(10, 60))
def test_thinning_keeps_real_rows_the_extremes_and_every_gap(
    pairs: list[tuple[float, float]], points: int
) -> None:
    full = columns([x for x, _ in pairs], [y for _, y in pairs])
    thin = thinned(full, points)
    rows = thin["seq"]
    assert np.array_equal(rows, np.unique(rows))  # real rows, in order, none twice
    for name in ("x_arcsec", "y_arcsec"):
        assert np.array_equal(thin[name], full[name][rows], equal_nan=True)
        if np.isfinite(full[name]).any():
            assert np.nanmax(thin[name]) == np.nanmax(full[name])
            assert np.nanmin(thin[name]) == np.nanmin(full[name])
        gaps_before = np.isnan(full[name]).any()
        assert np.isnan(thin[name]).any() == gaps_before
    if len(pairs) > points:
        bins = max(1, points // 4)
        assert rows.size <= 8 * bins + 2


def test_thinning_of_a_day_like_series_is_about_as_many_points_as_asked() -> None:
    x = np.random.default_rng(3).normal(size=36_000).tolist()
    assert thinned(columns(x, x[::-1]), 3000)["seq"].size == pytest.approx(3000, rel=0.1)
