"""A floor as JSON, and back."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import fields
from typing import Any

from readout.errors import BadInput
from readout.stability.floor import AxisFloor, Floor

SCHEMA = "readout.floor/1"


def floor_document(floor: Floor) -> dict[str, Any]:
    """As JSON, in full precision, so that it is read back as it was."""
    return {
        "schema": SCHEMA,
        "created_utc": floor.created_utc,
        "calibration_id": floor.calibration_id,
        "duration_s": floor.duration_s,
        "interval_s": floor.interval_s,
        "n": floor.n,
        "tau_s": list(floor.tau_s),
        "x": _axis_document(floor.x),
        "y": _axis_document(floor.y),
        "words": list(floor.words()),
    }


def floor_of_document(document: Any) -> Floor:
    """The floor in a document. Raises BadInput, one line, for one that is none or of another kind.

    The words are not read: they follow from the numbers.
    """
    if not isinstance(document, Mapping) or document.get("schema") != SCHEMA:
        raise BadInput(f"this is no floor of the kind {SCHEMA}: record the null test anew")
    try:
        tau_s = tuple(_positive(tau) for tau in document["tau_s"])
        calibration_id = document["calibration_id"]
        floor = Floor(
            created_utc=str(document["created_utc"]),
            calibration_id=None if calibration_id is None else str(calibration_id),
            duration_s=_positive(document["duration_s"]),
            interval_s=_positive(document["interval_s"]),
            n=int(document["n"]),
            tau_s=tau_s,
            x=_axis(document["x"]),
            y=_axis(document["y"]),
        )
    except (KeyError, TypeError, ValueError, OverflowError) as error:
        raise BadInput(
            f"this floor is incomplete or damaged ({error!r}): record it anew"
        ) from error
    columns = (*_columns(floor.x), *_columns(floor.y))
    if len(tau_s) < 3 or any(len(column) != len(tau_s) for column in columns):
        raise BadInput("this floor's columns differ in length: record the null test anew")
    if list(tau_s) != sorted(set(tau_s)):
        raise BadInput("this floor's averaging times do not rise: record the null test anew")
    return floor


def _columns(axis: AxisFloor) -> tuple[tuple[float, ...], tuple[float, ...]]:
    return axis.allan_arcsec, axis.allan_freedom


def _axis_document(axis: AxisFloor) -> dict[str, Any]:
    document = {field.name: getattr(axis, field.name) for field in fields(axis)}
    return {
        name: list(value) if isinstance(value, tuple) else value for name, value in document.items()
    }


def _axis(document: Mapping[str, Any]) -> AxisFloor:
    return AxisFloor(
        noise_sd_arcsec=_number(document["noise_sd_arcsec"]),
        drift_arcsec_per_h=_number(document["drift_arcsec_per_h"]),
        drift_u_arcsec_per_h=_number(document["drift_u_arcsec_per_h"]),
        drift_freedom=int(_positive(document["drift_freedom"])),
        allan_arcsec=tuple(_number(value) for value in document["allan_arcsec"]),
        allan_freedom=tuple(_positive(value) for value in document["allan_freedom"]),
    )


def _number(value: Any) -> float:
    if isinstance(value, bool) or not isinstance(value, int | float) or not math.isfinite(value):
        raise ValueError(f"{str(value)[:40]} is no number")
    return float(value)


def _positive(value: Any) -> float:
    if not _number(value) > 0:
        raise ValueError(f"{value} is not positive")
    return float(value)
