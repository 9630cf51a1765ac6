"""The command line as a whole, and how it ends: 0 done, 1 not done, 2 wrong usage."""

from __future__ import annotations

import errno
import os
import sys
from importlib import metadata
from typing import Annotated

import typer

from readout import __version__
from readout.cli import (
    calibrate,
    cameras,
    check,
    drift,
    live,
    locate,
    measure,
    prepare,
    runs,
    simulate,
)
from readout.cli.say import fail, speak_utf8
from readout.errors import BadInput, ReadoutError, cannot_write

OPENCV = (
    "opencv-python",
    "opencv-contrib-python",
    "opencv-python-headless",
    "opencv-contrib-python-headless",
)

app = typer.Typer(
    name="readout",
    help="The electronic readout of an autocollimator.",
    no_args_is_help=True,
    add_completion=False,
    pretty_exceptions_enable=False,
    rich_markup_mode="markdown",
    context_settings={"help_option_names": ["-h", "--help"]},
)
for command in (live, cameras, locate, measure, prepare, calibrate, drift, simulate):
    app.command(epilog=command.EXAMPLE)(command.command)
app.add_typer(check.app, name="check", epilog=check.EXAMPLE, help="Is the set-up sound?")
app.add_typer(runs.app, name="runs", epilog=runs.EXAMPLE, help="What has been recorded.")


def main() -> None:
    """Run the command line; a failure is one line on standard error and exit status 1."""
    speak_utf8()
    try:
        refuse_two_opencvs()
        app()
    except ReadoutError as error:
        fail(str(error))
    except BrokenPipeError:  # whoever read our output has left: there is nobody to tell
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        sys.exit(1)
    except OSError as error:
        if error.errno == errno.ENOSPC:
            fail(str(cannot_write(error.filename or "the output", error)))
        fail(f"{error}: check the name and the permissions")


def refuse_two_opencvs() -> None:
    """Two OpenCV distributions fill the same folder, and which one works is chance."""
    found = []
    for name in OPENCV:
        try:
            found.append(f"{name} {metadata.version(name)}")
        except metadata.PackageNotFoundError:
            continue
    if len(found) > 1:
        raise BadInput(
            f"two OpenCV packages are installed ({', '.join(found)}): uninstall all of them, "
            "then install opencv-python-headless alone"
        )


def _print_version(asked: bool) -> None:
    if asked:
        typer.echo(f"readout {__version__}")
        raise typer.Exit


@app.callback()
def readout(
    version: Annotated[
        bool,
        typer.Option("--version", callback=_print_version, is_eager=True, help="Print it."),
    ] = False,
) -> None:
    """The electronic readout of an autocollimator."""
    del version  # its callback has done the work
