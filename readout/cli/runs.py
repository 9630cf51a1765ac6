"""``readout runs``: what has been recorded, listed, shown and exported."""

from __future__ import annotations

import sys
from enum import StrEnum
from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

from readout.cli.options import DataOption, JsonOption, data_folder
from readout.cli.results import OverwriteOption, refuse_loss
from readout.cli.say import opened, print_json, print_line, progress

if TYPE_CHECKING:
    from readout.logbook import LogReader, Run

EXAMPLE = "Example: `readout runs export 3 --out drift.csv` writes run 3 as a table."

app = typer.Typer(no_args_is_help=True)
RunArgument = Annotated[int, typer.Argument(metavar="ID", help="As `readout runs list` says.")]


class Form(StrEnum):
    """How a run is written."""

    CSV = "csv"
    NDJSON = "ndjson"


@app.command("list", epilog="Example: `readout runs list`")
def list_runs(data: DataOption = None, json: JsonOption = False) -> None:
    """List the runs, the newest first."""
    from readout.service.run_messages import run_message

    with _log(data) as reader:
        runs = reader.runs()
    if json:
        for run in runs:
            print_json(dict(run_message(run)))
        return
    print_line(f"{'id':>4}  {'begun (UTC)':19}  {'length':>11}  {'rows':>9}  {'each':>8}  title")
    for run in runs:
        print_line(_line(run))


@app.command(epilog="Example: `readout runs show 3`")
def show(run: RunArgument, data: DataOption = None, json: JsonOption = False) -> None:
    """Show what is kept of one run beside its readings."""
    from readout.service.run_messages import whole_run_message

    with _log(data) as reader:
        message = whole_run_message(reader, reader.run(run))
    if json:
        print_json(dict(message))
        return
    for name, value in (
        ("run", f"{message['id']}  {message['title']}"),
        ("note", message["note"]),
        ("source", message["source"]),
        ("begun", message["started_utc"]),
        ("ended", f"{message['ended_utc'] or ''}  {message['ending'] or 'not ended'}".strip()),
        ("rows", f"{message['readings']}, {_each(message['every_s'])}"),
        *(
            ("calibration", f"{c['calibration']['id']} from reading {c['from_seq']}")
            for c in message["calibrations"]
        ),
        *(("event", f"{e['t_utc']}  {e['text']}") for e in message["events"]),
    ):
        print_line(f"{name:12} {value}".rstrip())


@app.command(epilog=EXAMPLE)
def export(
    run: RunArgument,
    form: Annotated[Form, typer.Option("--format", help="A table or JSON lines.")] = Form.CSV,
    out: Annotated[
        Path | None, typer.Option(metavar="FILE", help="Without it: standard output.")
    ] = None,
    sqlite: Annotated[
        Path | None,
        typer.Option(metavar="FILE", help="Copy the run, whole, into a new database instead."),
    ] = None,
    overwrite: OverwriteOption = False,
    data: DataOption = None,
) -> None:
    """Write all rows of one run, or hand the whole of it over as a file of its own."""
    from readout.logbook.export import copy_run, csv_of, ndjson_of

    if sqlite is not None:
        with _log(data) as reader:
            path = reader.path
            reader.run(run)
        refuse_loss(sqlite, overwrite=overwrite, inputs=[path])
        if not sqlite.exists():
            copy_run(path, run, sqlite)
            return
        fresh = sqlite.with_name(f".{sqlite.name}.new")  # the old one stays until this is whole
        fresh.unlink(missing_ok=True)
        copy_run(path, run, fresh)
        fresh.replace(sqlite)
        return
    with _log(data) as reader:
        pieces = csv_of(reader, run) if form is Form.CSV else ndjson_of(reader, run)
        if out is None:
            sys.stdout.writelines(pieces)
            return
        refuse_loss(out, overwrite=overwrite, inputs=[reader.path])
        with opened(out) as file, progress("rows", reader.run(run).readings) as tell:
            rows = 0
            for piece in pieces:
                file.write(piece)
                rows += piece.count("\n")
                tell(rows)


def _log(data: Path | None) -> LogReader:
    from readout.logbook import FILE_NAME, LogReader

    return LogReader(data_folder(data) / FILE_NAME)


def _line(run: Run) -> str:
    from readout.utc import utc_text

    begun = utc_text(run.started_utc_ns)[:19].replace("T", " ")
    each = f"{run.every_s:g} s" if run.every_s else "all"
    ending = "" if run.ending == "stopped" else f"  ({run.ending or 'not ended'})"
    return (
        f"{run.id:4}  {begun}  {_length(run.duration_s):>11}  {run.readings:9}  {each:>8}  "
        f"{run.title}{ending}"
    )


def _each(every_s: float) -> str:
    return f"means over {every_s:g} s" if every_s else "every reading"


def _length(seconds: float) -> str:
    """As a person says it: 12.3 s, 4 min 05 s, 7 h 12 min."""
    whole = round(seconds)
    if whole < 60:
        return f"{seconds:.1f} s"
    if whole < 3600:
        return f"{whole // 60} min {whole % 60:02} s"
    return f"{whole // 3600} h {whole % 3600 // 60:02} min"
