"""A calibration as a JSON file.

Names carry their units. The derived figures at the end (focal length, scales, rotation) are there
for a person who opens the file; reading takes the parameters alone, so that the two cannot part.
"""

from __future__ import annotations

import json
import math
from pathlib import Path
from typing import Annotated, Any, Literal

import numpy as np
from pydantic import BaseModel, ConfigDict, Field, ValidationError

from readout.angle.calibration import PARAMETERS, Calibration
from readout.errors import BadInput
from readout.files.atomic import write_text_whole
from readout.files.json_text import read_json
from readout.model import Target

SCHEMA = "readout.calibration/1"

SHORTEST_FOCAL_LENGTH_PX = 1.0
LONGEST_FOCAL_LENGTH_PX = 1e9
LARGEST_PARAMETER = 1e6
ROUNDING = 1e-9
"""A covariance may be off by so much of its variances, and no more."""

_Row7 = Annotated[tuple[float, ...], Field(min_length=7, max_length=7)]


class _Model(BaseModel):
    model_config = ConfigDict(allow_inf_nan=False)


class _Parameters(_Model):
    a_xx_per_px: float
    a_xy_per_px: float
    a_yx_per_px: float
    a_yy_per_px: float
    p0_x_px: float
    p0_y_px: float
    k1: float


class _File(_Model):
    schema_: Literal["readout.calibration/1"] = Field(alias="schema")
    id: Annotated[str, Field(min_length=1)]
    created_utc: str
    method: str
    target: Target
    image_width_px: Annotated[int, Field(gt=0, le=1_000_000)]
    image_height_px: Annotated[int, Field(gt=0, le=1_000_000)]
    signs: Literal["proven", "unproven"]
    parameters: _Parameters
    parameter_cov: Annotated[tuple[_Row7, ...], Field(min_length=7, max_length=7)]
    pitch_um: Annotated[float, Field(gt=0, le=1e6)] | None
    residuals: tuple[dict[str, Any], ...]
    residual_rms_arcsec: float | None
    n: Annotated[int, Field(ge=0)]
    warnings: tuple[str, ...]
    made_from: dict[str, Any]
    signs_shown: tuple[dict[str, Any], ...] = ()


def save_calibration(path: Path, calibration: Calibration) -> None:
    """Write ``calibration`` to ``path``, replacing the file whole. Raises BadInput if it cannot."""
    write_text_whole(
        path, json.dumps(calibration_document(calibration), indent=2, allow_nan=False) + "\n"
    )


def load_calibration(path: Path) -> Calibration:
    """The calibration in the file at ``path``.

    Raises BadInput, with one line for the user, for a file that is missing, no JSON, of an
    unknown schema, incomplete, or with numbers no instrument can have.
    """
    try:
        content = path.read_bytes()
    except FileNotFoundError:
        raise BadInput(f"calibration file {path} does not exist: check the name") from None
    except OSError as error:
        raise BadInput(f"cannot read calibration file {path} ({error.strerror})") from error
    return parse_calibration(content, name=str(path))


def parse_calibration(text: bytes, *, name: str) -> Calibration:
    """The calibration in what a file holds; ``name`` is what errors call the file.

    Raises BadInput as ``load_calibration`` does.
    """
    try:
        document = read_json(text)
    except ValueError as error:
        raise BadInput(f"{name} is no calibration file ({error})") from error
    schema = document.get("schema") if isinstance(document, dict) else None
    if schema != SCHEMA:
        found = "none" if schema is None else repr(schema)
        raise BadInput(
            f"{name} has the schema {found}, this version reads {SCHEMA!r}: "
            "choose a calibration file, or one written by this version"
        )
    try:
        content = _File.model_validate(document)
    except ValidationError as error:
        first = error.errors()[0]
        where = ".".join(str(part) for part in first["loc"])
        raise BadInput(
            f"calibration file {name} cannot be used: {where}: {first['msg'].lower()}"
        ) from error
    p = content.parameters
    fault = _fault(p) or _fault_of_cov(content.parameter_cov)
    if fault is not None:
        raise BadInput(f"calibration file {name} cannot be used: {fault}")
    return Calibration(
        id=content.id,
        created_utc=content.created_utc,
        method=content.method,
        matrix=((p.a_xx_per_px, p.a_xy_per_px), (p.a_yx_per_px, p.a_yy_per_px)),
        p0_px=(p.p0_x_px, p.p0_y_px),
        image_width_px=content.image_width_px,
        image_height_px=content.image_height_px,
        k1=p.k1,
        param_cov=content.parameter_cov,
        signs=content.signs,
        target=content.target,
        pitch_um=content.pitch_um,
        residuals=content.residuals,
        residual_rms_arcsec=content.residual_rms_arcsec,
        n=content.n,
        warnings=content.warnings,
        made_from=content.made_from,
        signs_shown=content.signs_shown,
    )


def _fault(p: _Parameters) -> str | None:
    """What no optics can have."""
    scale = max(abs(p.a_xx_per_px), abs(p.a_xy_per_px), abs(p.a_yx_per_px), abs(p.a_yy_per_px))
    if not 1 / LONGEST_FOCAL_LENGTH_PX < scale < 1 / SHORTEST_FOCAL_LENGTH_PX:
        return "its matrix is that of no focal length there is"
    determinant = p.a_xx_per_px * p.a_yy_per_px - p.a_xy_per_px * p.a_yx_per_px
    if not abs(determinant) > 1e-9 * scale**2:
        return "its matrix does not tell the two axes apart"
    if max(abs(p.p0_x_px), abs(p.p0_y_px), abs(p.k1)) > LARGEST_PARAMETER:
        return "its axis or its distortion is far beyond any picture"
    return None


def _fault_of_cov(rows: tuple[tuple[float, ...], ...]) -> str | None:
    """What no covariance is: its variances judge the rest, so that units do not matter."""
    cov = np.array(rows)
    variance = np.diag(cov)
    if variance.min() < 0 or np.abs(cov).max() > LARGEST_PARAMETER**2:
        return "parameter_cov: a variance is negative or beyond all measure"
    sd = np.sqrt(variance)
    unit = np.outer(sd, sd)
    if (np.abs(cov) > unit * (1 + ROUNDING)).any():
        return "parameter_cov: a covariance is larger than its variances allow"
    correlation = np.divide(cov, unit, out=np.zeros_like(cov), where=unit > 0)
    if not np.allclose(correlation, correlation.T, rtol=0, atol=ROUNDING):
        return "parameter_cov: it is not symmetric"
    if np.linalg.eigvalsh(correlation).min() < -ROUNDING:
        return "parameter_cov: some of its combinations have a negative variance"
    return None


def calibration_document(calibration: Calibration) -> dict[str, Any]:
    """What a calibration file holds, as JSON takes it."""
    (a_xx, a_xy), (a_yx, a_yy) = calibration.matrix
    scale_x, scale_y = calibration.scale_arcsec_per_px
    rms = calibration.residual_rms_arcsec
    return {
        "schema": SCHEMA,
        "id": calibration.id,
        "created_utc": calibration.created_utc,
        "method": calibration.method,
        "target": calibration.target.value,
        "image_width_px": calibration.image_width_px,
        "image_height_px": calibration.image_height_px,
        "signs": calibration.signs,
        "signs_shown": list(calibration.signs_shown),
        "parameters": {
            "a_xx_per_px": a_xx,
            "a_xy_per_px": a_xy,
            "a_yx_per_px": a_yx,
            "a_yy_per_px": a_yy,
            "p0_x_px": calibration.p0_px[0],
            "p0_y_px": calibration.p0_px[1],
            "k1": calibration.k1,
        },
        "parameter_order": list(PARAMETERS),
        "parameter_cov": [list(row) for row in calibration.param_cov],
        "pitch_um": calibration.pitch_um,
        "residuals": list(calibration.residuals),
        "residual_rms_arcsec": rms if rms is None or math.isfinite(rms) else None,
        "n": calibration.n,
        "warnings": list(calibration.warnings),
        "made_from": calibration.made_from,
        "focal_length_px": calibration.focal_length_px,
        "focal_length_px_sd": calibration.focal_length_px_sd,
        "focal_length_mm": calibration.focal_length_mm,
        "scale_x_arcsec_per_px": scale_x,
        "scale_y_arcsec_per_px": scale_y,
        "rotation_deg": calibration.rotation_deg,
        "mirrored": calibration.mirrored,
    }
