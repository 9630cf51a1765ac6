"""A budget as JSON, for pages, reports and scripts.

Units end the names; a line's input has its unit beside it. What is not known, and an infinite
number of degrees of freedom, is null.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from typing import Any

from readout.angle.budget import LEVEL, Budget, Contribution, Standing
from readout.angle.budget_conditions import parse_conditions
from readout.angle.budget_reading import Seen, TiltBudget, reading_budget
from readout.angle.calibration import Calibration

SCHEMA = "readout.budget/1"


def reading_budget_document(
    calibration: Calibration,
    seen: Seen,
    given: Mapping[str, Any],
    *,
    zero: Seen | None = None,
    level: float = LEVEL,
) -> dict[str, Any]:
    """The budget of a reading from what the user gave as JSON (``parse_conditions``), as JSON.

    Raises BadInput, with one line for the user, for what cannot be used.
    """
    conditions = parse_conditions(given)
    return tilt_budget_document(
        reading_budget(calibration, seen, conditions, zero=zero, level=level)
    )


def tilt_budget_document(both: TiltBudget) -> dict[str, Any]:
    """Both axes: ``x`` and ``y``, each as ``budget_document`` gives it."""
    return {"schema": SCHEMA, "x": budget_document(both.x), "y": budget_document(both.y)}


def budget_document(budget: Budget) -> dict[str, Any]:
    """One budget as plain values that JSON can take."""
    unit = budget.unit
    return {
        "quantity": budget.quantity,
        f"value_{unit}": budget.value,
        f"combined_u_{unit}": budget.combined_u,
        f"independent_u_{unit}": budget.independent_u,
        f"common_u_{unit}": budget.common_u,
        "effective_freedom": _finite(budget.effective_freedom),
        "level": budget.level,
        "coverage_factor": budget.coverage_factor,
        f"expanded_u_{unit}": budget.expanded_u,
        "defaults": list(budget.named(Standing.DEFAULT)),
        "not_stated": list(budget.named(Standing.NOT_STATED)),
        "lines": [
            _line(line, share, unit)
            for line, share in zip(budget.contributions, budget.shares, strict=True)
        ],
        "correlations": [
            {"first": pair.first, "second": pair.second, "r": pair.r}
            for pair in budget.correlations
        ],
    }


def _line(line: Contribution, share: float, unit: str) -> dict[str, Any]:
    present = line.standard_uncertainty is not None
    return {
        "name": line.name,
        "standing": line.standing.value,
        "unit": line.unit,
        "value": line.value if present else None,
        "distribution": line.distribution.value if present else None,
        "half_width": line.half_width,
        "standard_uncertainty": line.standard_uncertainty,
        "freedom": _finite(line.freedom) if present else None,
        "common": line.common if present else None,
        f"sensitivity_{unit}_per_unit": line.sensitivity if present else None,
        f"u_{unit}": abs(line.signed_u) if present else None,
        "share": share if present else None,
        "note": line.note,
    }


def _finite(value: float) -> float | None:
    return value if math.isfinite(value) else None
