"""Talking to the person or program at the other end: results, failures, progress."""

from __future__ import annotations

import io
import json
import sys
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any, NoReturn, TextIO

import typer

from readout.errors import cannot_write
from readout.model import Quality

QUIET_S = 1.0
"""Work shorter than this shows no progress."""


def speak_utf8() -> None:
    """Write UTF-8 whatever the system's old code page, and into files and pipes the same lines.

    What UTF-8 cannot carry (bytes of a file's name that are no text) is spelt out.
    """
    for stream in (sys.stdout, sys.stderr):
        if isinstance(stream, io.TextIOWrapper):
            lines = None if stream.isatty() else "\n"
            stream.reconfigure(encoding="utf-8", errors="backslashreplace", newline=lines)


def fail(line: str) -> NoReturn:
    """Say what is wrong and leave with status 1."""
    warn(line)
    sys.exit(1)


def warn(line: str) -> None:
    """One line on standard error."""
    sys.stderr.write("readout: " + " ".join(line.splitlines()) + "\n")
    sys.stderr.flush()


def note(line: str) -> None:
    """A remark on standard error, beside the result."""
    sys.stderr.write(line + "\n")


def print_json(row: dict[str, Any]) -> None:
    """One object on one line of standard output, out at once."""
    print_line(json.dumps(row, allow_nan=False, ensure_ascii=False))


def print_line(line: str) -> None:
    """One line of standard output, out at once."""
    typer.echo(line)
    sys.stdout.flush()


def opened(path: Path) -> TextIO:
    """The file at ``path``, to be written anew. Raises BadInput where it cannot be."""
    try:
        return path.open("w", encoding="utf-8", errors="backslashreplace", newline="")
    except OSError as error:
        raise cannot_write(path, error) from error


_REMEDY = {
    Quality.NO_IMAGE: "nothing like the target, however turned: tilt the mirror until its return "
    "comes into view, give light, sharpen",
    Quality.SEVERAL_RETURNS: "which is the mirror's? Cover the mirror and give what is left as "
    "--fixed, or nudge the mirror: the return is what moves",
}


def quality_words(quality: Quality) -> str:
    """The flags as a person reads them; where one cannot guess it, with what may be done."""
    words = ", ".join(quality.words()).replace("_", " ") or "good"
    remedies = [remedy for flag, remedy in _REMEDY.items() if flag in quality]
    return f"{words} ({'; '.join(remedies)})" if remedies else words


@contextmanager
def progress(
    what: str, total: int | None = None, *, show: bool = True
) -> Iterator[Callable[[int], None]]:
    """A function to tell how much is done, shown on standard error if that is a terminal.

    Nothing is shown for work that takes less than a second, nor unless ``show``.
    """
    if not (show and sys.stderr.isatty()):
        yield lambda _done: None
        return
    from rich.console import Console
    from rich.progress import MofNCompleteColumn, Progress, SpinnerColumn, TextColumn

    bar = Progress(
        SpinnerColumn(),
        TextColumn(what),
        MofNCompleteColumn(),
        console=Console(stderr=True),
        transient=True,
    )
    task = bar.add_task(what, total=total)
    begin_s = time.monotonic()

    def tell(done: int) -> None:
        bar.update(task, completed=done)
        if not bar.live.is_started and time.monotonic() - begin_s > QUIET_S:
            bar.start()

    try:
        yield tell
    finally:
        bar.stop()
