"""An observer in a process of its own, for drivers that may hang.

Only observations, errors and requested pictures cross the pipe. The parent asks with a word, the
child answers with a tuple whose first element says what it is:

    ("seen", observation)             the next observation
    ("waiting",)                      no frame yet, but alive
    ("picture", picture or None)      on request
    ("error", name, line)             a ReadoutError of the class ``name``; the child ends

A child that says nothing for too long is ended (asked, then killed) and the source counts as
lost: what it costs is one restart. The child ends when its parent does, even inside a driver.
"""

from __future__ import annotations

import contextlib
import logging
import multiprocessing
import os
import signal
import sys
import threading
import time
from collections.abc import Callable, Iterator
from multiprocessing.connection import Connection, wait
from types import TracebackType
from typing import Any, Self

from readout import errors
from readout.angle import Calibration
from readout.capture.source import Source
from readout.capture.source_name import source_name
from readout.errors import ReadoutError, SourceLost, SourceStalled
from readout.instrument.observer import DirectObserver, Picture
from readout.instrument.preparing import Preparing
from readout.model import Observation, Target

log = logging.getLogger(__name__)

OPEN_WITHIN_S = 30.0
SILENT_AT_MOST_S = 4.0
CHILD_TIMEOUT_S = 0.25
ASKED_TO_END_S = 0.3

OpenSource = Callable[[str], Source]


class ChildObserver:
    """Observes ``source`` in a spawned process.

    Entering starts the child and returns at once; until it is ready, ``observe`` raises
    SourceStalled. ``open_within_s`` and ``silent_at_most_s`` bound its silence before and after
    it has seen its first frame. ``open_source`` and ``preparing``
    are pickled into the child.
    """

    live = True
    calibration: Calibration | None = None

    def __init__(
        self,
        source: str,
        *,
        target: Target,
        open_source: OpenSource | None = None,
        preparing: Preparing | None = None,
        open_within_s: float = OPEN_WITHIN_S,
        silent_at_most_s: float = SILENT_AT_MOST_S,
    ) -> None:
        self._arguments = source, target, open_source, preparing
        self._open_within_s = open_within_s
        self._silent_at_most_s = silent_at_most_s
        self._source = source_name(source)
        self._process: multiprocessing.process.BaseProcess | None = None
        self._pipe: Any = None  # a Connection; on Windows another class with the same methods
        self._ready = False
        self._heard_s = 0.0
        self._asking = threading.Lock()
        self._answered = threading.Condition()
        self._picture: Picture | None = None
        self._answers = 0

    def __enter__(self) -> Self:
        context = multiprocessing.get_context("spawn")
        self._pipe, theirs = context.Pipe()
        self._process = context.Process(
            target=_child, args=(theirs, *self._arguments), name="camera", daemon=True
        )
        with _interrupts_blocked():
            self._process.start()
        theirs.close()
        self._ready = False
        self._heard_s = time.monotonic()
        return self

    def __exit__(
        self,
        exc_type: type[BaseException] | None,
        exc: BaseException | None,
        tb: TracebackType | None,
    ) -> None:
        pipe, process = self._pipe, self._process
        with self._asking:
            self._pipe = self._process = None
            if pipe is not None:
                with contextlib.suppress(OSError):
                    pipe.send("end")
        if process is not None:
            _end(process)
        if pipe is not None:
            pipe.close()
        with self._answered:
            self._answered.notify_all()

    def observe(self, timeout_s: float) -> Observation:
        """The next observation; see `readout.instrument.observer.Observer`."""
        deadline_s = time.monotonic() + timeout_s
        while True:
            message = self._receive(deadline_s - time.monotonic())
            match message:
                case ("seen", Observation() as observation):
                    self._ready = True  # not before: a slow machine needs its time for the first
                    return observation
                case ("picture", picture):
                    with self._answered:
                        self._picture = picture
                        self._answers += 1
                        self._answered.notify_all()
                case ("error", str(name), str(line)):
                    raise _error(name, line)
                case _:  # waiting: the deadline decides
                    if time.monotonic() >= deadline_s:
                        raise SourceStalled(f"{self._source}: no frame within {timeout_s:.3g} s")

    def picture(self, timeout_s: float) -> Picture | None:
        """The newest picture, fetched from the child; any thread but the observing one."""
        with self._answered:
            before = self._answers
            with self._asking:
                if self._pipe is None:
                    return None
                try:
                    self._pipe.send("picture")
                except OSError:
                    return None
            self._answered.wait_for(lambda: self._answers > before or self._pipe is None, timeout_s)
            return self._picture if self._answers > before else None

    def prepare_anew(self) -> None:
        """As an `Observer` does; a word alone crosses, which waits for no child."""
        with self._asking, contextlib.suppress(OSError):
            if self._pipe is not None:
                self._pipe.send("prepare")

    def _receive(self, timeout_s: float) -> tuple[Any, ...]:
        pipe, process = self._pipe, self._process
        if pipe is None or process is None:
            raise SourceLost(f"{self._source} is not open: open it first")
        try:
            if pipe.poll(max(0.0, timeout_s)):
                message: tuple[Any, ...] = pipe.recv()
                self._heard_s = time.monotonic()
                return message
        except (EOFError, OSError):
            process.join(1.0)
            raise SourceLost(
                f"{self._source}: the process that reads it has died (exit {process.exitcode})"
            ) from None
        silent_s = time.monotonic() - self._heard_s
        if silent_s > (self._silent_at_most_s if self._ready else self._open_within_s):
            raise SourceLost(f"{self._source}: its driver has not answered for {silent_s:.1f} s")
        return ("waiting",)


@contextlib.contextmanager
def _interrupts_blocked() -> Iterator[None]:
    """A child begun in here never hears Ctrl-C, not even while it imports: its parent ends it."""
    if sys.platform == "win32":
        yield
    else:
        before = signal.pthread_sigmask(signal.SIG_BLOCK, {signal.SIGINT})
        try:
            yield
        finally:
            signal.pthread_sigmask(signal.SIG_SETMASK, before)


def _end(process: multiprocessing.process.BaseProcess) -> None:
    """End the child: it was asked already; then terminate, then kill, each with a bounded wait."""
    process.join(ASKED_TO_END_S)
    if process.is_alive():
        process.terminate()
        process.join(ASKED_TO_END_S)
    if process.is_alive():
        process.kill()
        process.join(ASKED_TO_END_S)


def _error(name: str, line: str) -> ReadoutError:
    kind = getattr(errors, name, SourceLost)
    if isinstance(kind, type) and issubclass(kind, ReadoutError):
        return kind(line)
    return SourceLost(line)


def _child(
    pipe: Connection,
    source: str,
    target: Target,
    open_source: OpenSource | None,
    preparing: Preparing | None,
) -> None:
    """What runs in the child."""
    signal.signal(signal.SIGINT, signal.SIG_IGN)  # where it could not be blocked before
    threading.Thread(target=_end_with_parent, daemon=True).start()
    try:
        from readout.sighting import locate

        if open_source is None:
            from readout.capture import open as capture_open

            open_source = capture_open.open_source
        with DirectObserver(
            open_source(source), target=target, locate=locate, preparing=preparing
        ) as observer:
            while not _asked_to_end(pipe, observer):
                try:
                    pipe.send(("seen", observer.observe(CHILD_TIMEOUT_S)))
                except SourceStalled:
                    pipe.send(("waiting",))
    except ReadoutError as error:
        _send(pipe, ("error", type(error).__name__, str(error)))
    except (EOFError, OSError):
        return  # the parent has closed the pipe
    except Exception as error:
        log.debug("the child failed", exc_info=True)
        what = f"internal error, please report it: {type(error).__name__}: {error}"
        _send(pipe, ("error", "SourceLost", f"{source_name(source)}: {what}"))


def _asked_to_end(pipe: Connection, observer: DirectObserver) -> bool:
    while pipe.poll(0):
        match pipe.recv():
            case "picture":
                pipe.send(("picture", observer.picture(0.0)))
            case "prepare":
                observer.prepare_anew()
            case _:
                return True
    return False


def _send(pipe: Connection, message: tuple[str, ...]) -> None:
    with contextlib.suppress(OSError):
        pipe.send(message)


def _end_with_parent() -> None:
    parent = multiprocessing.parent_process()
    if parent is not None:
        wait([parent.sentinel])
        os._exit(0)  # the main thread may hang in a driver
