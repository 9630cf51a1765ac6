"""The logging endpoint: rows as they come, means with count and scatter, losses told."""

from __future__ import annotations

import asyncio
import csv
import dataclasses
import io
import json
import math
from collections.abc import AsyncIterator, Callable

import numpy as np
import pytest

from readout.instrument import Event
from readout.model import Reading
from readout.service import log_routes
from readout.service.feed import Feed
from readout.service.log_routes import Interval
from tests.instrument.fakes import reading, unmeasured

Lines = Callable[[Feed, float], AsyncIterator[str]]


def logged(lines: Lines, every_s: float, readings: list[Reading]) -> str:
    """What a client reads that comes before the readings and stays until the end."""

    async def run() -> str:
        feed = Feed(capacity=1000)
        feed.attach(asyncio.get_running_loop())
        text: list[str] = []

        async def client() -> None:
            async for line in lines(feed, every_s):
                text.append(line)  # noqa: PERF401 (what was read stays when the client is ended)

        reading_client = asyncio.create_task(client())
        await asyncio.sleep(0)
        for each in readings:
            feed.append(each)
        await asyncio.sleep(0)
        await asyncio.sleep(0)
        feed.detach()
        await asyncio.wait_for(reading_client, 5.0)
        assert not feed._subscriptions
        return "".join(text)

    return asyncio.run(run())


def test_every_reading_as_json_lines() -> None:
    text = logged(log_routes._json_lines, 0.0, [reading(0, 1.5), unmeasured(1)])
    rows = [json.loads(line) for line in text.splitlines()]
    assert [row["x_arcsec"] for row in rows] == [1.5, None]
    assert rows[0]["t_utc"] == "1970-01-01T00:00:00.000Z"
    assert rows[1]["quality"] == ["no_image"]
    assert "n" not in rows[0]


def test_means_with_count_and_scatter() -> None:
    values = np.random.default_rng(2).normal(size=30)  # ten a second for 3 s
    text = logged(log_routes._json_lines, 1.0, [reading(k, x) for k, x in enumerate(values)])
    rows = [json.loads(line) for line in text.splitlines()]
    assert len(rows) == 3  # the last one at the end
    assert rows[0]["x_arcsec"] == pytest.approx(values[:10].mean(), abs=1e-6)
    assert rows[1]["x_scatter_arcsec"] == pytest.approx(values[10:20].std(ddof=1), abs=1e-6)
    assert [row["n"] for row in rows] == [10, 10, 10]
    assert [row["t_s"] for row in rows] == pytest.approx([0.45, 1.45, 2.45])


def test_csv_has_one_header_and_empty_cells() -> None:
    text = logged(
        log_routes._csv_lines, 1.0, [reading(k, 2.0) for k in range(10)] + [unmeasured(10)]
    )
    rows = list(csv.DictReader(io.StringIO(text)))
    assert rows[0]["x_arcsec"] == "2.0"
    assert rows[0]["n"] == "10"
    assert rows[0]["dropped"] == ""
    assert rows[1]["x_arcsec"] == rows[1]["x_scatter_arcsec"] == ""
    assert rows[1]["quality"] == "no_image"


def test_a_client_that_lags_is_told_how_many_it_lost(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(log_routes, "QUEUE", 4)
    readings = [reading(k) for k in range(10)]
    rows = [json.loads(line) for line in logged(log_routes._json_lines, 0.0, readings).splitlines()]
    assert {"dropped": 6} in rows
    assert [round(row["t_s"] * 10) for row in rows if "t_s" in row] == [6, 7, 8, 9]
    table = logged(log_routes._csv_lines, 0.0, readings)
    last = list(csv.DictReader(io.StringIO(table)))[-1]
    assert last["dropped"] == "6"
    assert last["t_utc"] == ""


def test_an_interval_ends_with_the_first_reading_of_the_next_or_with_silence() -> None:
    interval = Interval(0.5)
    assert interval.rows([reading(k) for k in range(5)]) == []  # 0.0 to 0.4 s
    (row,) = interval.rows([reading(5)])
    assert (row["n"], row["t_s"]) == (5, pytest.approx(0.2))
    assert interval.ends_in_s == pytest.approx(0.5 + log_routes.PATIENCE_S)
    (row,) = interval.close()
    assert row["n"] == 1
    assert interval.close() == []


def test_what_is_no_reading_does_not_end_an_interval() -> None:
    """A status that changes every few readings; intervals of 1 s, ten readings a second."""

    async def run() -> str:
        feed = Feed(capacity=1000)
        feed.attach(asyncio.get_running_loop())
        rows = log_routes._json_lines(feed, 1.0)
        text: list[str] = []

        async def client() -> None:
            async for line in rows:
                text.append(line)  # noqa: PERF401 (what was read stays when the client is ended)

        reading_client = asyncio.create_task(client())
        for k in range(25):
            await asyncio.sleep(0)
            feed.append(reading(k))
            if k % 3 == 0:
                for _ in range(3):
                    await asyncio.sleep(0)
                feed.announce()
                feed.announce(Event(0.0, 0, "settings", "the settings were changed"))
                for _ in range(3):
                    await asyncio.sleep(0)
        feed.detach()
        await asyncio.wait_for(reading_client, 5.0)
        return "".join(text)

    counts = [json.loads(line)["n"] for line in asyncio.run(run()).splitlines()]
    assert counts == [10, 10, 5]


def test_silence_ends_an_interval_though_the_status_changes(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    monkeypatch.setattr(log_routes, "PATIENCE_S", 0.02)

    async def run() -> dict[str, object]:
        feed = Feed(capacity=10)
        feed.attach(asyncio.get_running_loop())
        rows = log_routes._rows(feed, 0.01)
        first = asyncio.ensure_future(anext(rows))
        await asyncio.sleep(0)
        feed.append(reading(0))
        while not first.done():
            feed.announce()
            await asyncio.sleep(0.005)
        await rows.aclose()
        return first.result()[0]

    assert asyncio.run(asyncio.wait_for(run(), 5.0))["n"] == 1


def test_a_gap_brings_no_rows() -> None:
    rows = Interval(1.0).rows([reading(0), reading(1, t_s=60.0), reading(2, t_s=61.0)])
    assert [row["t_s"] for row in rows] == [0.0, 60.0]
    assert not any(isinstance(v, float) and math.isnan(v) for row in rows for v in row.values())


def test_without_a_scale_the_positions_are_kept_and_counted() -> None:
    """A night without a scale is not lost: one that is found later makes angles of the pixels."""
    unscaled = [
        dataclasses.replace(reading(k, math.nan, math.nan, sd=math.nan), x_px=300.0 + k, y_px=7.5)
        for k in range(11)
    ]
    row, _ = (json.loads(line) for line in logged(log_routes._json_lines, 1.0, unscaled).split())
    assert (row["x_arcsec"], row["x_scatter_arcsec"], row["quality"]) == (None, None, [])
    assert (row["n"], row["x_px"], row["y_px"]) == (10, 304.5, 7.5)
    table = logged(log_routes._csv_lines, 0.0, unscaled)
    assert [r["x_px"] for r in csv.DictReader(io.StringIO(table))][:2] == ["300.0", "301.0"]


def test_a_file_that_has_its_header_is_gone_on_with() -> None:
    def lines(feed: Feed, every_s: float) -> AsyncIterator[str]:
        return log_routes._csv_lines(feed, every_s, header=False)

    whole = logged(log_routes._csv_lines, 0.0, [reading(0)])
    assert whole.splitlines()[1:] == logged(lines, 0.0, [reading(0)]).splitlines()
