"""The application: routes, guard, problems and the dashboard's files."""

from __future__ import annotations

import asyncio
from collections.abc import AsyncIterator
from contextlib import asynccontextmanager
from pathlib import Path

from fastapi import FastAPI
from fastapi.responses import HTMLResponse
from fastapi.staticfiles import StaticFiles

from readout import __version__
from readout.capture.open import SourceDescription, describe_source
from readout.errors import BadInput
from readout.instrument import Instrument
from readout.instrument.fixed_frame import FixedFrame
from readout.instrument.focusing import Focusing
from readout.instrument.known_points import KnownPoints
from readout.instrument.recorder import Recorder
from readout.instrument.sign_test import SignTest
from readout.instrument.steady import Steadiness
from readout.service.body_limit import BodyLimit
from readout.service.calibrating_routes import calibrating_routes
from readout.service.calibration_routes import FOLDER, calibration_routes
from readout.service.check_routes import check_routes
from readout.service.control import Control
from readout.service.drift_routes import FLOOR_FILE, drift_routes
from readout.service.feed import Feed
from readout.service.fixed_frame_routes import fixed_frame_routes
from readout.service.guard import Guard
from readout.service.log_routes import log_routes
from readout.service.messages import StatusMessage, status_message
from readout.service.preparing_routes import preparing_routes
from readout.service.problems import answer_with_problems
from readout.service.reading_routes import reading_routes
from readout.service.run_routes import run_routes
from readout.service.setting_routes import setting_routes
from readout.service.sign_routes import sign_routes
from readout.service.stream import stream_routes

STATIC = Path(__file__).parent.parent / "static"

NOT_BUILT = """<!doctype html><meta charset="utf-8"><title>readout</title>
<p>The dashboard has not been built. In a checkout, <code>pip install -e .</code> builds it; with
node at hand, <code>npm ci</code> and <code>npm run build</code> in <code>web</code> do.
The readings are there all the same: <a href="/api/status">/api/status</a>,
<a href="/api/reading">/api/reading</a>.</p>
"""


def make_app(
    instrument: Instrument,
    feed: Feed,
    control: Control,
    recorder: Recorder,
    *,
    port: int,
    static: Path = STATIC,
) -> FastAPI:
    """The application that serves ``instrument`` on ``port`` of this machine."""

    def status() -> StatusMessage:
        now = instrument.status()
        return status_message(
            now,
            described=_described(now.source),
            recording=recorder.recording,
            dropped=feed.dropped,
            session_start_utc_ns=instrument.start_time.t_utc_ns,
        )

    @asynccontextmanager
    async def lifespan(_: FastAPI) -> AsyncIterator[None]:
        feed.attach(asyncio.get_running_loop())
        yield
        feed.detach()

    app = FastAPI(
        title="readout", version=__version__, lifespan=lifespan, docs_url=None, redoc_url=None
    )
    answer_with_problems(app)
    app.include_router(reading_routes(instrument, feed, status))
    app.include_router(log_routes(feed))
    app.include_router(setting_routes(instrument, feed, control))
    shelf, steadiness = recorder.path.parent / FOLDER, Steadiness(instrument)
    app.include_router(calibration_routes(instrument, shelf))
    points = KnownPoints(instrument, steadiness)
    app.include_router(calibrating_routes(instrument, points, control, feed, shelf))
    signs = SignTest(instrument, steadiness)
    app.include_router(sign_routes(instrument, signs, control, feed, shelf))
    app.include_router(preparing_routes(instrument, Focusing(instrument), control, feed))
    fixed_frame = FixedFrame(instrument, control.kept_for)
    app.include_router(fixed_frame_routes(fixed_frame, feed))
    app.include_router(check_routes(instrument))
    app.include_router(drift_routes(instrument, recorder.path, control.folder / FLOOR_FILE))
    app.include_router(run_routes(recorder, feed, control))
    app.include_router(stream_routes(instrument, feed, status))
    if (static / "index.html").is_file():
        app.mount("/", StaticFiles(directory=static, html=True))
    else:
        app.get("/", include_in_schema=False)(lambda: HTMLResponse(NOT_BUILT))
    app.add_middleware(BodyLimit)
    app.add_middleware(Guard, port=port)
    return app


def _described(source: str | None) -> SourceDescription | None:
    """None for a folder or file that is gone by now: that is told by the state, not here."""
    try:
        return describe_source(source) if source else None
    except BadInput:
        return None
