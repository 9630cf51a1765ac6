"""A calibration set: a folder with frames, ``tilts.csv`` and ``set.toml``.

``tilts.csv`` has the columns ``file,x_arcsec,y_arcsec,sd_arcsec`` (either axis may be empty in a
row), or ``file,lever_mm,height_mm,height_sd_mm,axis`` for a bar raised at one end, or
``file,turn_deg,turn_sd_deg`` for a wedge turned in its plane (empty: out of the beam).
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np

from readout.angle import Camera, Mounting, SharedInput, TiltSet
from readout.angle.lever import LeverRow, lever_tilts
from readout.angle.wedge import Wedge, WedgeIs, wedge_of_glass, wedge_tilts
from readout.errors import BadInput
from readout.files.calibration_set_about import (
    AxesPart,
    FoilPart,
    GraduationPart,
    NudgePart,
    SetAbout,
    WedgePart,
    read_about,
)
from readout.files.calibration_set_table import (
    LEVER_COLUMNS,
    TILT_COLUMNS,
    TURN_COLUMNS,
    TableRow,
    is_inside,
    read_table,
)
from readout.files.pictures import PICTURE_SUFFIXES
from readout.model import F64, Target

__all__ = ["CalibrationSet", "KnownTilt", "read_calibration_set"]


@dataclass(frozen=True, slots=True)
class KnownTilt:
    """One row: a frame's file name and what is known of the mirror then, NaN where nothing is.

    ``across_sd_arcsec``: as in ``TiltSet``. ``turn_deg``: of a wedge, NaN without one. ``line``:
    of the table.
    """

    file: str
    x_arcsec: float
    y_arcsec: float
    sd_arcsec: float
    across_sd_arcsec: float = 0.0
    turn_deg: float = math.nan
    line: int = 0


@dataclass(frozen=True, slots=True)
class CalibrationSet:
    """All that the folder says, angles in arc-seconds.

    ``way``: how the tilts came about. ``scale_rel_sd``: relative standard uncertainty common to
    all tilts, from the stage's scale; ``shared``: what else rows share. ``two_returns``: each
    frame holds two returns and a row says how they differ, rear less front.
    ``nominal_focal_length_mm`` is for comparison only. ``fixed``: frame with the mirror covered.
    With ``graduation`` the scale comes from its marks in ``marks_file``, and the tilts, if any,
    are steps to check it with.
    """

    folder: Path
    target: Target
    note: str
    pitch_um: float | None
    mounting: Mounting
    nominal_focal_length_mm: float | None
    scale_rel_sd: float
    tilts: tuple[KnownTilt, ...]
    way: str = "known tilts"
    shared: tuple[SharedInput, ...] = ()
    two_returns: bool = False
    fixed: str | None = None
    nudges: tuple[NudgePart, ...] = ()
    foils: tuple[FoilPart, ...] = ()
    axes: AxesPart | None = None
    graduation: GraduationPart | None = None
    marks_file: str | None = None
    own_lens: bool = False

    def planned(self) -> TiltSet:
        """The tilts without positions; two rows a frame where each holds two returns."""
        n = len(self.tilts)
        tilts = TiltSet(
            names=tuple(tilt.file for tilt in self.tilts),
            position_px=np.full((n, 2), np.nan),
            position_cov_px2=np.full((n, 3), np.nan),
            tilt_arcsec=np.array([(t.x_arcsec, t.y_arcsec) for t in self.tilts]).reshape(n, 2),
            sd_arcsec=np.array([t.sd_arcsec for t in self.tilts]),
            across_sd_arcsec=np.array([t.across_sd_arcsec for t in self.tilts]),
            shared=self.shared,
        )
        if self.scale_rel_sd > 0:
            whole = SharedInput("scale of the stage", self.scale_rel_sd * tilts.known_arcsec)
            tilts = replace(tilts, shared=(*tilts.shared, whole))
        return _front_and_rear(tilts) if self.two_returns else tilts

    def camera(self, width_px: int, height_px: int) -> Camera:
        """What is known of the camera, given the pictures' size."""
        return Camera(width_px, height_px, self.pitch_um, self.mounting)


def read_calibration_set(folder: Path, *, with_frames: bool = True) -> CalibrationSet:
    """Read ``tilts.csv`` and ``set.toml`` (which may be missing) of a folder.

    ``with_frames=False``: the frames need not be there yet. Raises BadInput, one line naming file,
    row and remedy, for anything that cannot be used.
    """
    folder = Path(folder)
    if not folder.is_dir():
        raise BadInput(f"{folder} is no folder: name a folder with frames and a tilts.csv")
    about = read_about(folder / "set.toml")
    columns, rows = _table(folder / "tilts.csv", about)
    if (columns == TURN_COLUMNS) != (about.wedge is not None):
        raise BadInput(
            f"{folder / 'tilts.csv'} has the columns {','.join(columns)} and set.toml has "
            f"{'a' if about.wedge else 'no'} [wedge]: a wedge needs it and "
            f"{','.join(TURN_COLUMNS)}, other ways neither"
        )
    way, tilts, shared = _known(columns, rows, about)
    if with_frames:
        _refuse_missing(folder, tilts, about)
    return CalibrationSet(
        folder=folder,
        target=about.target,
        note=about.note,
        pitch_um=about.camera.pixel_um,
        mounting=about.camera.mounting,
        nominal_focal_length_mm=about.optics.focal_length_mm,
        scale_rel_sd=about.stage.scale_rel_sd,
        tilts=tuple(tilts),
        way=way,
        shared=shared,
        two_returns=about.wedge is not None and about.wedge.used is WedgeIs.TWO_RETURNS,
        fixed=None if about.fixed is None else about.fixed.file,
        nudges=about.nudge,
        foils=about.foil,
        axes=about.axes,
        graduation=about.graduation,
        marks_file=_marks_file(folder, about) if with_frames else None,
        own_lens=about.camera.own_lens,
    )


def _table(path: Path, about: SetAbout) -> tuple[tuple[str, ...], list[TableRow]]:
    """The table; a graduated scale needs none."""
    if about.graduation is not None and not path.exists():
        return (TURN_COLUMNS if about.wedge is not None else TILT_COLUMNS), []
    return read_table(path)


def _marks_file(folder: Path, about: SetAbout) -> str | None:
    """The frame with the marks: the one that is named, else the first that is nothing else."""
    if about.graduation is None or about.graduation.file is not None:
        return None if about.graduation is None else about.graduation.file
    others = {Path(name) for name in about.other_files}
    frames = sorted(
        path.name
        for path in folder.iterdir()
        if path.suffix.lower() in PICTURE_SUFFIXES and Path(path.name) not in others
    )
    if not frames:
        raise BadInput(f"{folder} holds no picture of the scale: take one with the marks in view")
    return frames[0]


def _refuse_missing(folder: Path, tilts: list[KnownTilt], about: SetAbout) -> None:
    missing = [tilt.file for tilt in tilts if not (folder / tilt.file).is_file()]
    if missing:
        raise BadInput(
            f"{folder / 'tilts.csv'} names {missing[0]}, which is not in the folder"
            + (f" ({len(missing)} such files)" if len(missing) > 1 else "")
        )
    for name in about.other_files:
        if not is_inside(name) or not (folder / name).is_file():
            raise BadInput(f"{folder / 'set.toml'} names {name}, which is not in the folder")


def _known(
    columns: tuple[str, ...], rows: list[TableRow], about: SetAbout
) -> tuple[str, list[KnownTilt], tuple[SharedInput, ...]]:
    """The way, what is known of each row, and what rows share."""
    if columns == TILT_COLUMNS:
        return "known tilts", [_tilt(row) for row in rows], ()
    if columns == LEVER_COLUMNS:
        return "lever", *_lever(rows, about)
    assert about.wedge is not None  # the caller has seen to it
    return _turned(rows, about.wedge)


def _tilt(row: TableRow) -> KnownTilt:
    tilt = KnownTilt(
        row.file,
        row.number("x_arcsec"),
        row.number("y_arcsec"),
        row.required("sd_arcsec", least=0.0),
        line=row.line,
    )
    if math.isnan(tilt.x_arcsec) and math.isnan(tilt.y_arcsec):
        raise BadInput(f"{row.where}: neither x_arcsec nor y_arcsec is given")
    return tilt


def _lever(
    rows: list[TableRow], about: SetAbout
) -> tuple[list[KnownTilt], tuple[SharedInput, ...]]:
    made = lever_tilts(
        [_lever_row(row) for row in rows],
        lever_is=about.lever_is,
        lever_sd_mm=about.stage.lever_sd_mm,
        seating_sd_mm=about.stage.seating_sd_mm,
    )
    return [
        KnownTilt(row.file, float(x), float(y), float(sd), line=row.line)
        for row, (x, y), sd in zip(rows, made.tilt_arcsec, made.sd_arcsec, strict=True)
    ], made.shared


def _lever_row(row: TableRow) -> LeverRow:
    height_mm = row.number("height_mm")
    if math.isnan(height_mm):
        raise BadInput(f"{row.where}: height_mm is empty: give 0 for nothing under the lever")
    if row.cells["axis"] not in ("x", "y"):
        raise BadInput(f"{row.where}: axis is {row.cells['axis'] or 'empty'}, give x or y")
    return LeverRow(
        row.where,
        row.required("lever_mm", least=1e-3),
        height_mm,
        row.required("height_sd_mm", least=0.0),
        "xy".index(row.cells["axis"]),
    )


def _turned(
    rows: list[TableRow], part: WedgePart
) -> tuple[str, list[KnownTilt], tuple[SharedInput, ...]]:
    turn_deg = np.array([row.number("turn_deg") for row in rows])
    turn_sd_deg = np.array([row.required("turn_sd_deg", least=0.0) for row in rows])
    if part.used is WedgeIs.TWO_RETURNS and np.isnan(turn_deg).any():
        row = rows[int(np.isnan(turn_deg).argmax())]
        raise BadInput(f"{row.where}: turn_deg is empty: without the window there is one return")
    made = wedge_tilts(_wedge(part), turn_deg, turn_sd_deg, mark_sd_deg=part.mark_sd_deg)
    tilts = [
        KnownTilt(row.file, float(x), float(y), 0.0, float(across), float(turn), row.line)
        for row, (x, y), across, turn in zip(
            rows, made.tilt_arcsec, made.across_sd_arcsec, turn_deg, strict=True
        )
    ]
    way = {
        WedgeIs.IN_TRANSMISSION: "wedge in transmission",
        WedgeIs.TWO_RETURNS: "two returns of a window",
    }
    return way[part.used], tilts, made.shared


def _wedge(part: WedgePart) -> Wedge:
    if part.reading_arcsec is not None:
        return Wedge(part.reading_arcsec, part.reading_sd_arcsec)
    assert part.angle_arcsec is not None  # one of the two, as the model has checked
    assert part.index is not None
    return wedge_of_glass(
        part.used,
        angle_arcsec=part.angle_arcsec,
        angle_sd_arcsec=part.angle_sd_arcsec,
        index=part.index,
        index_sd=part.index_sd,
    )


def _front_and_rear(tilts: TiltSet) -> TiltSet:
    """Two rows a frame with a zero of their own: the front face at 0, the rear one beside it."""
    assert tilts.across_sd_arcsec is not None  # ``planned`` gives it

    def paired(rear: F64) -> F64:
        return np.stack([np.zeros_like(rear), rear], axis=1).reshape(-1, *rear.shape[1:])

    return TiltSet(
        names=tuple(f"{name} ({face})" for name in tilts.names for face in ("front", "rear")),
        position_px=np.repeat(tilts.position_px, 2, axis=0),
        position_cov_px2=np.repeat(tilts.position_cov_px2, 2, axis=0),
        tilt_arcsec=paired(tilts.tilt_arcsec),
        sd_arcsec=paired(tilts.sd_arcsec),
        across_sd_arcsec=paired(tilts.across_sd_arcsec),
        shared=tuple(SharedInput(s.name, paired(s.tilt_arcsec)) for s in tilts.shared),
        zero_of=np.repeat(np.arange(len(tilts.names)), 2),
    )
