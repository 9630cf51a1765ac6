"""What is known of a camera as one file: fixed and dark frame, bad pixels, curve, mosaic.

The file is an archive of arrays as numpy writes them (``.npz``): ``about``, a text of JSON with
the schema and everything that is no array; and those that are known of ``fixed`` and ``dark``
(float32, levels), ``defective`` (bool), each (height, width), and ``response`` (float32, a level
of light for each level of the camera). It is written and read without any loss.
"""

from __future__ import annotations

import io
import json
import zipfile
import zlib
from dataclasses import dataclass
from pathlib import Path
from typing import Annotated, Any, Literal

import numpy as np
from numpy.typing import NDArray
from pydantic import BaseModel, ConfigDict, Field, ValidationError

from readout.errors import BadInput
from readout.files.atomic import write_bytes_whole
from readout.files.json_text import read_json
from readout.sighting.prepare import Preparation
from readout.sighting.raw import Colour, Mosaic, Plane
from readout.sighting.response import Response

SCHEMA = "readout.preparation/1"
SUFFIX = ".npz"

_PICTURES = {"fixed": np.float32, "dark": np.float32, "defective": np.bool_}
_ARCHIVE_FAULTS = (OSError, ValueError, KeyError, EOFError, zipfile.BadZipFile, zlib.error)


@dataclass(frozen=True, slots=True)
class CameraKnowledge:
    """A preparation, the pictures it is for, and when it was made.

    ``size_px``: (width, height), None where nothing in it has a size. ``full_scale``: of the
    camera. ``made_utc`` also names it: another one has another. ``fixed_frames`` and
    ``dark_frames``: how many were averaged.
    """

    preparation: Preparation
    full_scale: int
    made_utc: str
    fixed_frames: int = 0
    dark_frames: int = 0

    @property
    def size_px(self) -> tuple[int, int] | None:
        made = self.preparation
        for picture in (made.fixed, made.dark, made.defective):
            if picture is not None:
                return picture.shape[1], picture.shape[0]
        return None

    def refuse_unfit(self, size_px: tuple[int, int], full_scale: int) -> None:
        """Raise BadInput if this was made for pictures of another size or depth."""
        made_for = self.size_px or size_px
        if made_for != size_px:
            raise BadInput(
                f"what is known of the camera is for pictures of {made_for[0]} × {made_for[1]} px, "
                f"these are {size_px[0]} × {size_px[1]} px: take the frames anew in this size"
            )
        if self.full_scale != full_scale:
            raise BadInput(
                f"what is known of the camera is for levels up to {self.full_scale}, these "
                f"pictures go to {full_scale}: take the frames anew in this format"
            )


class _About(BaseModel):
    model_config = ConfigDict(allow_inf_nan=False)

    schema_: Literal["readout.preparation/1"] = Field(alias="schema")
    made_utc: Annotated[str, Field(min_length=1)]
    full_scale: Annotated[int, Field(gt=0, le=65535)]
    shift: Annotated[int, Field(ge=0, le=15)] = 0
    mosaic: Mosaic | None = None
    colour: Colour = Colour.GREEN
    saturation: Annotated[int, Field(gt=0, le=65535)] | None = None
    fixed_frames: Annotated[int, Field(ge=0)] = 0
    dark_frames: Annotated[int, Field(ge=0)] = 0


def save_knowledge(path: Path, known: CameraKnowledge) -> None:
    """Write ``known`` to ``path``, replacing the file whole. Raises BadInput if it cannot."""
    made = known.preparation
    about = {
        "schema": SCHEMA,
        "made_utc": known.made_utc,
        "full_scale": known.full_scale,
        "shift": made.shift,
        "mosaic": None if made.plane is None else made.plane.mosaic.value,
        "colour": (made.plane.colour if made.plane else Colour.GREEN).value,
        "saturation": made.saturation,
        "fixed_frames": known.fixed_frames,
        "dark_frames": known.dark_frames,
    }
    arrays: dict[str, NDArray[Any] | None] = {
        "fixed": made.fixed,
        "dark": made.dark,
        "defective": made.defective,
        "response": None if made.response is None else made.response.table,
    }
    data = io.BytesIO()
    held = {name: array for name, array in arrays.items() if array is not None}
    np.savez_compressed(data, allow_pickle=False, about=np.array(json.dumps(about)), **held)
    write_bytes_whole(path, data.getvalue())


def load_knowledge(path: Path) -> CameraKnowledge:
    """What the file at ``path`` holds.

    Raises BadInput, one line naming the file, where it is missing, damaged, of an unknown schema
    or its parts do not fit together.
    """
    path = Path(path)
    try:
        data = path.read_bytes()
    except FileNotFoundError:
        raise BadInput(f"{path} does not exist: check the name") from None
    except OSError as error:
        raise BadInput(f"cannot read {path} ({error.strerror})") from error
    try:
        with np.load(io.BytesIO(data), allow_pickle=False) as archive:
            text = str(archive["about"])
            arrays = {name: archive[name] for name in archive.files if name != "about"}
    except (*_ARCHIVE_FAULTS, AttributeError, TypeError, MemoryError) as error:
        raise BadInput(
            f"{path} is no file of what is known of a camera, or damaged: make it anew with "
            "readout prepare"
        ) from error
    try:
        about = _About.model_validate(read_json(text.encode("utf-8", "replace")))
    except ValidationError as error:
        fault = error.errors()[0]
        where = ".".join(str(part) for part in fault["loc"])
        raise BadInput(f"{path} cannot be used: {where}: {fault['msg'].lower()}") from error
    except ValueError as error:
        raise BadInput(f"{path} cannot be used ({error}): make it anew") from error
    fault_in = _fault(about, arrays)
    if fault_in is not None:
        raise BadInput(f"{path} cannot be used: {fault_in}: make it anew with readout prepare")
    return CameraKnowledge(
        Preparation(
            shift=about.shift,
            plane=Plane(about.mosaic, about.colour) if about.mosaic else None,
            response=Response(arrays["response"]) if "response" in arrays else None,
            dark=arrays.get("dark"),
            fixed=arrays.get("fixed"),
            defective=arrays.get("defective"),
            saturation=about.saturation,
        ),
        full_scale=about.full_scale,
        made_utc=about.made_utc,
        fixed_frames=about.fixed_frames,
        dark_frames=about.dark_frames,
    )


def _fault(about: _About, arrays: dict[str, NDArray[Any]]) -> str | None:
    """What does not fit together, None if all does."""
    shapes = set()
    for name, kind in _PICTURES.items():
        picture = arrays.get(name)
        if picture is None:
            continue
        if picture.ndim != 2 or picture.size == 0 or picture.dtype != kind:
            return f"{name} is no picture of {np.dtype(kind).name}"
        if not np.all(np.isfinite(picture)):
            return f"{name} holds what is no number"
        shapes.add(picture.shape)
    if len(shapes) > 1:
        return "its pictures are of different sizes"
    table = arrays.get("response")
    if table is not None and (
        table.shape != (about.full_scale + 1,)
        or table.dtype != np.float32
        or not np.all(np.isfinite(table))
        or not np.all(np.diff(table) >= 0)
    ):
        return "response is no rising table with a number for each level"
    if about.saturation is not None and about.saturation > about.full_scale:
        return "saturation lies above full_scale"
    return None
