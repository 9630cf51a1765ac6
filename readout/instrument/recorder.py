"""From the instrument into the log: one run at a time.

Readings and events come from the acquisition's thread, which is never made to wait. A run that
cannot be written any more is ended and told of; measuring goes on.
"""

from __future__ import annotations

import contextlib
import json
import threading
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from readout import __version__
from readout.capture.source_name import source_name
from readout.errors import NotNow, NotRecorded
from readout.files.calibration_file import calibration_document
from readout.instrument.instrument import SOURCE_CHANGED, Instrument
from readout.instrument.joining import Intervals, Joined
from readout.instrument.values import Event
from readout.logbook import Logbook, NewRun, Spread
from readout.logbook.statements import STOPPED, UNWRITABLE
from readout.model import Reading

ENDED_WITH_READOUT = "readout was ended"
ANOTHER_SOURCE = "the source was changed"


@dataclass(frozen=True, slots=True)
class Recording:
    """The run being recorded. ``readings``: rows so far."""

    id: int
    title: str
    started_utc_ns: int
    every_s: float
    readings: int


@dataclass(slots=True)
class _Open:
    """A run and where it stands. ``begin_s``: its start, as readings count seconds."""

    id: int
    new: NewRun
    begin_s: float
    intervals: Intervals | None
    readings: int = 0
    calibration_id: str | None = None


class Recorder:
    """Records the readings of ``instrument`` in ``logbook``, from ``start`` to ``stop``."""

    def __init__(self, instrument: Instrument, logbook: Logbook) -> None:
        self._instrument = instrument
        self._logbook = logbook
        self._switching = threading.Lock()  # one start or stop at a time; may wait for the disk
        self._lock = threading.Lock()  # of what follows; never held for longer than an instant
        self._open: _Open | None = None
        self._beginning: list[Reading] | None = None  # what comes while the log begins a run
        self._broken_off_id: int | None = None
        instrument.on_reading.append(self._take)
        instrument.on_event.append(self._hear)

    @property
    def path(self) -> Path:
        """Where the log lies, to be read by anybody."""
        return self._logbook.path

    @property
    def recording(self) -> Recording | None:
        """The run being recorded now."""
        with self._lock:
            run = self._open
            if run is None:
                return None
            new = run.new
            return Recording(run.id, new.title, new.started_utc_ns, new.every_s, run.readings)

    @property
    def broken_off_id(self) -> int | None:
        """The run that could not be written any more, while the log itself may not know it."""
        return self._broken_off_id

    def start(
        self, *, title: str, note: str = "", every_s: float = 0.0, settings: dict[str, Any]
    ) -> int:
        """Begin a run and answer its id; ``settings`` are kept with it, without passwords.

        Raises NotNow while another one is recorded, NotRecorded if the log cannot be written.
        """
        with self._switching:
            if self._open is not None:
                raise NotNow(f"run {self._open.id} is being recorded: stop it first")
            with self._lock:
                self._beginning = []
                begin_s, started_utc_ns = self._instrument.now()
            new = NewRun(
                title=title,
                note=note,
                started_utc_ns=started_utc_ns,
                source=self._instrument.source or "",
                every_s=every_s,
                settings=_without_passwords(settings),
                version=__version__,
            )
            try:
                run_id = self._logbook.start(new)  # may wait for the disk, or for who has it locked
            except BaseException:
                with self._lock:
                    self._beginning = None
                raise
            self._broken_off_id = None  # the log has ended it
            intervals = Intervals(every_s, origin_s=begin_s) if every_s > 0 else None
            with self._lock:
                run = _Open(run_id, new, begin_s, intervals)
                beginning, self._open, self._beginning = self._beginning, run, None
                failure = self._record_all(run, beginning or [])
            if failure is not None:
                self._break_off(run, failure)
                raise failure
        self._instrument.tell("run_started", f"run {run_id} has begun")
        return run_id

    def stop(self, run_id: int, ending: str = STOPPED) -> None:
        """End the run; everything of it is written on return.

        Raises NotNow if it is not the one being recorded, NotRecorded if its end cannot be
        written.
        """
        with self._switching:
            run = self._open
            if run is None or run.id != run_id:
                raise NotNow(f"run {run_id} is not being recorded: there is nothing to stop")
            with self._lock:
                self._close_interval(run)
                self._open = None
            why = "" if ending == STOPPED else f": {ending}"
            self._instrument.tell("run_stopped", f"run {run_id} ended, {run.readings} rows{why}")
            self._logbook.end(self._instrument.now()[1], ending)

    def close(self) -> None:
        """End the run that is open, if there is one."""
        recording = self.recording
        if recording is not None:
            self.stop(recording.id, ENDED_WITH_READOUT)
        elif self._broken_off_id is not None:
            with contextlib.suppress(NotRecorded):  # told before; perhaps there is room by now
                self._logbook.end(self._instrument.now()[1], UNWRITABLE)

    # -- called by the acquisition ------------------------------------------------------------

    def _take(self, reading: Reading) -> None:
        with self._lock:
            if self._beginning is not None:
                self._beginning.append(reading)
            run = self._open
            failure = self._record_all(run, [reading]) if run is not None else None
        if run is not None and failure is not None:
            self._break_off(run, failure)

    def _record_all(self, run: _Open, readings: list[Reading]) -> NotRecorded | None:
        """Record those taken since the run began; with a failure the run is no longer open."""
        try:
            for reading in readings:
                if reading.t_s >= run.begin_s:
                    self._record(run, reading)
        except NotRecorded as error:
            self._open = None
            return error
        return None

    def _break_off(self, run: _Open, failure: NotRecorded) -> None:
        self._broken_off_id = run.id
        self._instrument.tell("run_stopped", f"run {run.id} was broken off: {failure}")

    def _record(self, run: _Open, reading: Reading) -> None:
        if reading.calibration_id != run.calibration_id:
            self._note_calibration(run, reading)
        if run.intervals is None:
            self._logbook.append(reading, t_s=reading.t_s - run.begin_s)
            run.readings += 1
        else:
            self._append_joined(run, run.intervals.add(reading))

    def _close_interval(self, run: _Open) -> None:
        if run.intervals is not None:
            # What cannot be written any more is told of when the run is ended.
            with contextlib.suppress(NotRecorded):
                self._append_joined(run, run.intervals.close())

    def _append_joined(self, run: _Open, joined: Joined | None) -> None:
        if joined is None:
            return
        spread = Spread(joined.n, joined.x_scatter_arcsec, joined.y_scatter_arcsec)
        t_s = joined.reading.t_s - run.begin_s
        self._logbook.append(joined.reading, t_s=t_s, spread=spread)
        run.readings += 1

    def _note_calibration(self, run: _Open, reading: Reading) -> None:
        calibration = self._instrument.calibration
        if calibration is not None and calibration.id == reading.calibration_id:
            document = json.dumps(calibration_document(calibration), allow_nan=False)
            self._logbook.note_calibration(reading.seq, calibration.id, document)
            run.calibration_id = calibration.id

    def _hear(self, event: Event) -> None:
        # A log that cannot be written cannot hold the event that says so; viewers have it.
        with contextlib.suppress(NotRecorded):
            self._logbook.note_event(event.t_utc_ns, event.event, event.text)
        recording = self.recording
        if event.event == SOURCE_CHANGED and recording is not None:
            # Told of by the log itself if it fails; the new source is measured all the same.
            with contextlib.suppress(NotNow, NotRecorded):
                self.stop(recording.id, ANOTHER_SOURCE)


def _without_passwords(settings: dict[str, Any]) -> dict[str, Any]:
    source = settings.get("source")
    return settings | {"source": source_name(source)} if isinstance(source, str) else settings
