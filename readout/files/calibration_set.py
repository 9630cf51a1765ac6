"""A calibration set: a folder with frames, ``tilts.csv`` and ``set.toml``.

``tilts.csv`` has the columns ``file,x_arcsec,y_arcsec,sd_arcsec`` (either axis may be empty in a
row), or ``file,lever_mm,height_mm,height_sd_mm,axis`` for a bar raised at one end: its angle is
arcsin(height / lever) for a bar on two supports, arctan with ``lever_is = "horizontal"``.
"""

from __future__ import annotations

import csv
import math
import tomllib
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Annotated, Literal

from pydantic import BaseModel, ConfigDict, Field, ValidationError

from readout.angle import Mounting
from readout.errors import BadInput
from readout.model import Target
from readout.units import ARCSEC_PER_RAD

TILT_COLUMNS = ("file", "x_arcsec", "y_arcsec", "sd_arcsec")
LEVER_COLUMNS = ("file", "lever_mm", "height_mm", "height_sd_mm", "axis")

_Positive = Annotated[float, Field(gt=0, allow_inf_nan=False)]
_NotNegative = Annotated[float, Field(ge=0, allow_inf_nan=False)]


class _Part(BaseModel):
    model_config = ConfigDict(extra="forbid")


class _Camera(_Part):
    pixel_um: _Positive | None = None
    mounting: Mounting = Mounting.STRAIGHT


class _Optics(_Part):
    focal_length_mm: _Positive | None = None


class _Stage(_Part):
    scale_rel_sd: _NotNegative = 0.0
    lever_sd_mm: _NotNegative = 0.0


class _Set(_Part):
    target: Target = Target.CROSSHAIR
    note: str = ""
    lever_is: Literal["on_two_supports", "horizontal"] = "on_two_supports"
    camera: _Camera = _Camera()
    optics: _Optics = _Optics()
    stage: _Stage = _Stage()


@dataclass(frozen=True, slots=True)
class KnownTilt:
    """One row: a frame's file name and what is known of the mirror then, NaN where nothing is."""

    file: str
    x_arcsec: float
    y_arcsec: float
    sd_arcsec: float


@dataclass(frozen=True, slots=True)
class CalibrationSet:
    """All that the folder says, angles in arc-seconds.

    ``scale_rel_sd``: relative standard uncertainty common to all tilts, from the stage's scale or
    the lever's length. ``nominal_focal_length_mm`` is for comparison only.
    """

    folder: Path
    target: Target
    note: str
    pitch_um: float | None
    mounting: Mounting
    nominal_focal_length_mm: float | None
    scale_rel_sd: float
    tilts: tuple[KnownTilt, ...]


def read_calibration_set(folder: Path) -> CalibrationSet:
    """Read ``tilts.csv`` and ``set.toml`` (which may be missing) of a folder.

    Raises BadInput, one line naming file, row and remedy, for anything that cannot be used.
    """
    folder = Path(folder)
    if not folder.is_dir():
        raise BadInput(f"{folder} is no folder: name a folder with frames and a tilts.csv")
    about = _read_toml(folder / "set.toml")
    columns, rows = _read_table(folder / "tilts.csv")
    scale_rel_sd = about.stage.scale_rel_sd
    if columns == LEVER_COLUMNS:
        tilts, shortest_mm = _lever_tilts(rows, horizontal=about.lever_is == "horizontal")
        scale_rel_sd = math.hypot(scale_rel_sd, about.stage.lever_sd_mm / shortest_mm)
    else:
        tilts = [_tilt(row, where) for where, row in rows]
    missing = [tilt.file for tilt in tilts if not (folder / tilt.file).is_file()]
    if missing:
        raise BadInput(
            f"{folder / 'tilts.csv'} names {missing[0]}, which is not in the folder"
            + (f" ({len(missing)} such files)" if len(missing) > 1 else "")
        )
    return CalibrationSet(
        folder=folder,
        target=about.target,
        note=about.note,
        pitch_um=about.camera.pixel_um,
        mounting=about.camera.mounting,
        nominal_focal_length_mm=about.optics.focal_length_mm,
        scale_rel_sd=scale_rel_sd,
        tilts=tuple(tilts),
    )


def _read_toml(path: Path) -> _Set:
    try:
        document = tomllib.loads(path.read_text(encoding="utf-8"))
    except FileNotFoundError:
        return _Set()
    except (OSError, ValueError) as error:
        raise BadInput(f"cannot read {path} ({error}): mend it or take it away") from error
    except RecursionError:
        raise BadInput(f"cannot read {path} (nested without end): mend it") from None
    if "graduation" in document:
        raise BadInput(f"{path} is of a graduated reticle: give known tilts in a tilts.csv instead")
    document.pop("fixed", None)  # a frame with the mirror covered: nothing here needs it yet
    try:
        return _Set.model_validate(document)
    except ValidationError as error:
        first = error.errors()[0]
        where = ".".join(str(part) for part in first["loc"])
        raise BadInput(f"{path}: {where}: {first['msg'].lower()}") from error


def _read_table(path: Path) -> tuple[tuple[str, ...], list[tuple[str, dict[str, str]]]]:
    """Columns, and the rows with a name for each that a person finds."""
    try:
        lines = path.read_text(encoding="utf-8-sig").splitlines()
    except FileNotFoundError:
        raise BadInput(
            f"{path} does not exist: a set needs one, {','.join(TILT_COLUMNS)}"
        ) from None
    except (OSError, ValueError) as error:
        raise BadInput(f"cannot read {path} ({error})") from error
    table = csv.DictReader(lines)
    columns = tuple(name.strip() for name in table.fieldnames or ())
    if columns not in (TILT_COLUMNS, LEVER_COLUMNS):
        raise BadInput(
            f"{path} has the columns {','.join(columns) or 'of none'}: "
            f"give {','.join(TILT_COLUMNS)} or {','.join(LEVER_COLUMNS)}"
        )
    table.fieldnames = list(columns)
    rows = [
        (f"{path}, line {table.line_num}", {k: (v or "").strip() for k, v in row.items() if k})
        for row in table
    ]
    rows = [(where, row) for where, row in rows if any(row.values())]
    if not rows:
        raise BadInput(f"{path} holds no tilts: give one row a frame")
    names = [row["file"] for _, row in rows]
    for (where, _), name in zip(rows, names, strict=True):
        if not name or Path(name).is_absolute() or ".." in Path(name).parts:
            raise BadInput(f"{where}: {name or 'an empty name'} is no file of this folder")
        if names.count(name) > 1:
            raise BadInput(f"{where}: {name} is named twice: one row a frame")
    return columns, rows


def _number(row: dict[str, str], column: str, where: str) -> float:
    """A number, NaN for an empty cell."""
    if not row[column]:
        return math.nan
    try:
        value = float(row[column])
    except ValueError:
        raise BadInput(f"{where}: {column} is {row[column]!r}, not a number") from None
    if not math.isfinite(value):
        raise BadInput(f"{where}: {column} is {row[column]!r}: leave it empty if it is unknown")
    return value


def _required(row: dict[str, str], column: str, where: str, *, least: float) -> float:
    value = _number(row, column, where)
    if math.isnan(value) or value < least:
        raise BadInput(
            f"{where}: {column} must be {least:g} or more, it is {row[column] or 'empty'}"
        )
    return value


def _tilt(row: dict[str, str], where: str) -> KnownTilt:
    tilt = KnownTilt(
        row["file"],
        _number(row, "x_arcsec", where),
        _number(row, "y_arcsec", where),
        _required(row, "sd_arcsec", where, least=0.0),
    )
    if math.isnan(tilt.x_arcsec) and math.isnan(tilt.y_arcsec):
        raise BadInput(f"{where}: neither x_arcsec nor y_arcsec is given")
    return tilt


def _lever_tilts(
    rows: list[tuple[str, dict[str, str]]], *, horizontal: bool
) -> tuple[list[KnownTilt], float]:
    """Tilts of a lever raised by known heights, and its shortest length, mm.

    That one has the largest relative uncertainty, which then stands for all.
    """
    lengths = [_required(row, "lever_mm", where, least=1e-3) for where, row in rows]
    return list(_raised(rows, lengths, horizontal=horizontal)), min(lengths)


def _raised(
    rows: list[tuple[str, dict[str, str]]], lengths: list[float], *, horizontal: bool
) -> Iterator[KnownTilt]:
    for (where, row), lever in zip(rows, lengths, strict=True):
        height = _number(row, "height_mm", where)
        height_sd = _required(row, "height_sd_mm", where, least=0.0)
        if math.isnan(height):
            raise BadInput(f"{where}: height_mm is empty")
        if not horizontal and abs(height) >= lever:
            raise BadInput(
                f"{where}: a lever of {lever:g} mm cannot be raised by {height:g} mm: "
                "check which is which"
            )
        if row["axis"] not in ("x", "y"):
            raise BadInput(f"{where}: axis is {row['axis'] or 'empty'}, give x or y")
        ratio = height / lever
        angle = math.atan(ratio) if horizontal else math.asin(ratio)
        by_ratio = 1 / (1 + ratio**2) if horizontal else 1 / math.sqrt(1 - ratio**2)
        arcsec = angle * ARCSEC_PER_RAD
        yield KnownTilt(
            row["file"],
            arcsec if row["axis"] == "x" else math.nan,
            arcsec if row["axis"] == "y" else math.nan,
            height_sd / lever * by_ratio * ARCSEC_PER_RAD,
        )
