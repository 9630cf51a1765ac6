"""What the user knows of a set-up, for the lines of the budget that no picture can tell.

Nothing here has to be given. Where a usual value is known, it stands in, marked as a default;
where none is, the line says "not stated". A zero that is meant is given as 0.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, fields
from typing import Any

from readout.angle.budget import Contribution, within
from readout.angle.distributions import Distribution
from readout.errors import BadInput

ROLL_MRAD = 1.0
"""a mirror or carriage set back against an edge by hand (common practice)"""
AXIS_ERROR_DEG = 1.0
"""an axis set square to the line of sight by eye (common practice)"""
P0_PX = 100.0
"""a camera centred on the axis by eye (common practice)"""
CREEP_UM_PER_K = 1.0
"""a sensor held on one side by 50 mm of aluminium, 23e-6 /K: 1.15 um/K"""
GRADIENT_K_PER_M = 0.5
"""across the line of sight, in a room without sun or heater on it (common practice)"""


@dataclass(frozen=True, slots=True)
class Conditions:
    """Limits, each ± its value, None where not given.

    ``roll_mrad``: turn of the mirror about the optical axis between readings. ``axis_error_deg``:
    from square, of the axis turned about, to the optical axis. ``p0_px``: where the optical axis
    meets the picture, along each side. ``linearity_arcsec``: error that differs from place to
    place; arcsine for a periodic one (its amplitude), else rectangular. ``drift_arcsec_per_h`` and
    ``since_zero_h``: drift seen, and the time since the zero. ``creep_um_per_k`` and
    ``temperature_change_k``: of the sensor across the optical axis, since the zero or the
    calibration. ``path_m`` and ``gradient_k_per_m``: distance of the mirror, temperature gradient
    across it. ``seating_arcsec``: of a carriage set down again.

    ``further_x``, ``further_y``: what else the user knows, sensitivities in arcsec per unit.
    Raises BadInput for a negative limit or one that is no number.
    """

    roll_mrad: float | None = None
    axis_error_deg: float | None = None
    p0_px: float | None = None
    linearity_arcsec: float | None = None
    linearity_distribution: Distribution = Distribution.RECTANGULAR
    drift_arcsec_per_h: float | None = None
    since_zero_h: float | None = None
    creep_um_per_k: float | None = None
    temperature_change_k: float | None = None
    path_m: float | None = None
    gradient_k_per_m: float | None = None
    seating_arcsec: float | None = None
    further_x: tuple[Contribution, ...] = ()
    further_y: tuple[Contribution, ...] = ()

    def __post_init__(self) -> None:
        for name in LIMITS:
            value = getattr(self, name)
            if value is not None and not (math.isfinite(value) and value >= 0):
                raise BadInput(
                    f"{name} of {value:g} cannot be: give its limit as a number not negative, "
                    "or leave it out"
                )
        if self.linearity_distribution is Distribution.NORMAL:
            raise BadInput(
                "linearity is given by its limits: choose rectangular, triangular or arcsine"
            )


LIMITS = tuple(
    one.name
    for one in fields(Conditions)
    if one.name != "linearity_distribution" and not one.name.startswith("further")
)
"""names of the conditions that are plain numbers"""

_FURTHER = {
    "name",
    "axis",
    "half_width",
    "standard_uncertainty",
    "unit",
    "distribution",
    "arcsec_per_unit",
    "freedom",
    "common",
    "note",
}


def parse_conditions(document: Mapping[str, Any]) -> Conditions:
    """Conditions from JSON: numbers by the names of ``Conditions``, null or absent if not given.

    ``further`` lists what the user adds: ``name``, ``unit``, and either ``half_width`` (with
    ``distribution``, else rectangular) or ``standard_uncertainty``; also ``arcsec_per_unit`` (1),
    ``freedom`` (null: not in doubt), ``common`` (true), ``axis`` ("x", "y", else both) and
    ``note``. Raises BadInput, with one line for the user, for anything else.
    """
    known = {*LIMITS, "linearity_distribution", "further"}
    for key in document:
        if key not in known:
            raise BadInput(f"the budget knows no {key!r}: use {', '.join(sorted(known))}")
    limits = {name: _number(document.get(name), name) for name in LIMITS}
    shape = document.get("linearity_distribution")
    further = document.get("further") or []
    if not isinstance(further, list) or not all(isinstance(one, Mapping) for one in further):
        raise BadInput("further is a list of contributions, each with name, unit and half_width")
    added = [(one.get("axis"), _contribution(one)) for one in further]
    return Conditions(
        **limits,
        linearity_distribution=Distribution.RECTANGULAR if shape is None else _shape(shape),
        further_x=tuple(line for axis, line in added if axis != "y"),
        further_y=tuple(line for axis, line in added if axis != "x"),
    )


def _contribution(given: Mapping[str, Any]) -> Contribution:
    name = given.get("name")
    if not isinstance(name, str) or not name.strip():
        raise BadInput("a further contribution has no name: say what it is")
    for key in given:
        if key not in _FURTHER:
            raise BadInput(f"{name}: there is no {key!r}: use {', '.join(sorted(_FURTHER))}")
    if given.get("axis") not in (None, "x", "y"):
        raise BadInput(f"{name}: axis is x or y, or left out for both")
    half_width = _number(given.get("half_width"), f"{name}: half_width")
    u = _number(given.get("standard_uncertainty"), f"{name}: standard_uncertainty")
    per_unit = _number(given.get("arcsec_per_unit"), f"{name}: arcsec_per_unit")
    freedom = _number(given.get("freedom"), f"{name}: freedom")
    sensitivity = 1.0 if per_unit is None else per_unit
    doubt = math.inf if freedom is None else freedom
    unit, note, common = given.get("unit", "arcsec"), given.get("note", ""), given.get("common")
    if not isinstance(unit, str) or not isinstance(note, str):
        raise BadInput(f"{name}: unit and note are words")
    if common not in (None, True, False):
        raise BadInput(f"{name}: common is true or false")
    shape = given.get("distribution")
    if half_width is not None and u is None:
        return within(
            name,
            half_width,
            unit,
            distribution=Distribution.RECTANGULAR if shape is None else _shape(shape),
            sensitivity=sensitivity,
            freedom=doubt,
            common=common is not False,
            note=note,
        )
    if u is None or half_width is not None:
        raise BadInput(f"{name}: give either half_width or standard_uncertainty")
    return Contribution(
        name,
        u,
        unit,
        sensitivity,
        Distribution.NORMAL if shape is None else _shape(shape),
        doubt,
        common is not False,
        note=note,
    )


def _number(value: object, name: str) -> float | None:
    if value is None:
        return None
    if isinstance(value, bool) or not isinstance(value, int | float):
        raise BadInput(f"{name} is no number: give a number, or leave it out")
    return float(value)


def _shape(word: object) -> Distribution:
    try:
        return Distribution(str(word))
    except ValueError:
        names = ", ".join(one.value for one in Distribution)
        raise BadInput(f"there is no distribution {word!r}: choose one of {names}") from None
