"""``GET /api/log``, the logging endpoint: readings as they come, until the client leaves.

For anything that can read lines: ``curl``, a script, a spreadsheet. A client that lags gets a row
that says how many readings it lost.
"""

from __future__ import annotations

import asyncio
import csv
import io
from collections.abc import AsyncIterator
from typing import Annotated, Literal

from fastapi import APIRouter, Query
from fastapi.responses import StreamingResponse

from readout.instrument.joining import Intervals, Joined
from readout.model import Reading
from readout.rows import (
    POSITION_COLUMNS,
    SIGNS_COLUMN,
    SPREAD_COLUMNS,
    VALUE_COLUMNS,
    Cell,
    csv_cell,
    reading_row,
    rounded,
)
from readout.service.feed import Feed
from readout.service.messages import encode
from readout.utc import utc_text

QUEUE = 20_000
PATIENCE_S = 1.0
"""what a reading may come late before its interval is taken for over"""
Row = dict[str, Cell]


def log_routes(feed: Feed) -> APIRouter:
    """The logging endpoint."""
    routes = APIRouter(prefix="/api", tags=["readings"])

    @routes.get("/log")
    async def get_log(
        every_s: Annotated[float, Query(ge=0, le=86_400)] = 1.0,
        form: Annotated[Literal["ndjson", "csv"], Query(alias="format")] = "ndjson",
        header: bool = True,
    ) -> StreamingResponse:
        """Means over ``every_s`` seconds with count and scatter; 0: every reading.

        ``header=false``: CSV without its first line, to go on with a file that has one.
        """
        if form == "csv":
            return StreamingResponse(_csv_lines(feed, every_s, header), media_type="text/csv")
        return StreamingResponse(_json_lines(feed, every_s), media_type="application/x-ndjson")

    return routes


async def _json_lines(feed: Feed, every_s: float) -> AsyncIterator[str]:
    async for rows in _rows(feed, every_s):
        yield "".join(encode(row) + "\n" for row in rows)


async def _csv_lines(feed: Feed, every_s: float, header: bool = True) -> AsyncIterator[str]:
    averaged = SPREAD_COLUMNS if every_s > 0 else ()
    of_reading = ["t_utc", *VALUE_COLUMNS, "quality", *POSITION_COLUMNS, SIGNS_COLUMN]
    columns = [*of_reading, *averaged, "dropped"]
    if header:
        yield ",".join(columns) + "\n"
    async for rows in _rows(feed, every_s):
        text = io.StringIO()
        writer = csv.writer(text, lineterminator="\n")
        writer.writerows([csv_cell(row.get(column)) for column in columns] for row in rows)
        yield text.getvalue()


async def _rows(feed: Feed, every_s: float) -> AsyncIterator[list[Row]]:
    subscription = feed.subscribe(QUEUE)
    interval = Interval(every_s)
    clock = asyncio.get_running_loop().time
    came_s = clock()
    told_dropped = 0
    try:
        while not subscription.closed:
            silent_s = clock() - came_s
            readings = (await subscription.next(max(0.0, interval.ends_in_s - silent_s))).readings
            over = not readings and clock() - came_s >= interval.ends_in_s
            if readings or over:
                came_s = clock()
            rows = interval.close() if over else interval.rows(readings)
            if subscription.dropped > told_dropped:
                rows.append({"dropped": subscription.dropped - told_dropped})
                told_dropped = subscription.dropped
            if rows:
                yield rows
        if rows := interval.close():  # the service ends: what is held is not lost
            yield rows
    finally:
        feed.unsubscribe(subscription)


class Interval:
    """Gives a row for each interval that is over (``every_s`` 0: for each reading)."""

    def __init__(self, every_s: float) -> None:
        self._intervals = Intervals(every_s) if every_s > 0 else None

    @property
    def ends_in_s(self) -> float:
        """Silence after the newest reading that means its interval is over, with some patience."""
        left_s = self._intervals.left_s if self._intervals is not None else 0.0
        return left_s + PATIENCE_S

    def rows(self, readings: list[Reading]) -> list[Row]:
        """Rows that are complete with ``readings``."""
        if self._intervals is None:
            return [_unnamed(r) for r in readings]
        joined = [self._intervals.add(r) for r in readings]
        return [_joined_row(row) for row in joined if row is not None]

    def close(self) -> list[Row]:
        """The row of what is held, if anything is."""
        joined = self._intervals.close() if self._intervals is not None else None
        return [] if joined is None else [_joined_row(joined)]


def _joined_row(joined: Joined) -> Row:
    return {
        **_unnamed(joined.reading),
        "n": joined.n,
        "x_scatter_arcsec": rounded(joined.x_scatter_arcsec),
        "y_scatter_arcsec": rounded(joined.y_scatter_arcsec),
    }


def _unnamed(reading: Reading) -> Row:
    row = reading_row(reading)
    if "file" in row:  # a folder replayed: the stream's rows have times
        row = {"t_utc": utc_text(reading.t_utc_ns), **row}
        del row["file"]
    return row
