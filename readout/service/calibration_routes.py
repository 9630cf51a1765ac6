"""Calibration files kept in the data folder, to choose from in the dashboard.

One of them is put to use by naming its ``path`` as ``calibration`` in the settings.
"""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

from fastapi import APIRouter, Depends, Request
from typing_extensions import TypedDict

from readout.angle import Calibration
from readout.files.calibration_shelf import keep_calibration, kept_calibrations
from readout.instrument import Instrument
from readout.rows import rounded

FOLDER = "calibrations"
_A_FILE = {"requestBody": {"required": True, "content": {"application/json": {"schema": {}}}}}


class KeptCalibrationMessage(TypedDict):
    """A calibration to choose. ``active``: the readings are made with it now. ``name``,
    ``conditions``, ``source`` and ``note`` are those given when it was made, "" if none was.
    """

    id: str
    name: str
    created_utc: str
    method: str
    signs: str
    target: str
    focal_length_mm: float | None
    focal_length_px: float | None
    n: int
    image_width_px: int
    image_height_px: int
    focal_length_rel_u: float | None
    source: str
    conditions: str
    note: str
    warnings: list[str]
    active: bool
    path: str


def calibration_routes(instrument: Instrument, folder: Path) -> APIRouter:
    """Routes over the calibration files in ``folder``."""
    routes = APIRouter(prefix="/api/calibrations", tags=["calibrations"])

    @routes.get("")
    def get_calibrations() -> list[KeptCalibrationMessage]:
        """Those kept, the youngest first."""
        in_use = instrument.status().calibration
        return [kept_message(path, kept, in_use) for path, kept in kept_calibrations(folder)]

    @routes.post("", status_code=201, openapi_extra=_A_FILE)
    def post_calibration(text: Annotated[bytes, Depends(_body)]) -> KeptCalibrationMessage:
        """Keep a calibration file, given as the body; it is not put to use by that."""
        path, kept = keep_calibration(folder, text)
        return kept_message(path, kept, instrument.status().calibration)

    return routes


async def _body(request: Request) -> bytes:
    """The body as it came: the file is kept to the letter."""
    return await request.body()


def kept_message(path: Path, kept: Calibration, in_use: object) -> KeptCalibrationMessage:
    """One of the shelf; ``in_use``: the calibration that is."""
    focal_mm = kept.focal_length_mm
    return {
        "id": kept.id,
        "name": _text(kept, "name"),
        "created_utc": kept.created_utc,
        "method": kept.method,
        "signs": kept.signs,
        "target": kept.target.value,
        "focal_length_mm": None if focal_mm is None else rounded(focal_mm),
        "focal_length_px": rounded(kept.focal_length_px),
        "n": kept.n,
        "image_width_px": kept.image_width_px,
        "image_height_px": kept.image_height_px,
        "focal_length_rel_u": rounded(kept.focal_length_px_sd / kept.focal_length_px),
        "source": _text(kept, "source"),
        "conditions": _text(kept, "conditions"),
        "note": _text(kept, "note"),
        "warnings": list(kept.warnings),
        "active": kept == in_use,
        "path": str(path),
    }


def _text(kept: Calibration, name: str) -> str:
    """What was said of it when it was made; files of other programs may hold anything there."""
    said = kept.made_from.get(name)
    return said if isinstance(said, str) else ""
