"""The drift of a record as JSON, with what may be claimed of it."""

from __future__ import annotations

from typing import Any

import numpy as np

from readout.rows import Number, rounded
from readout.stability.allan import Allan
from readout.stability.drift import AxisDrift, RecordDrift
from readout.stability.floor import Floor
from readout.stability.floor_claims import claim_drift

SCHEMA = "readout.drift/1"


def drift_document(record: RecordDrift, floor: Floor | None = None) -> dict[str, Any]:
    """Rates, spread, gaps, and under ``allan`` columns of one length; null for what is missing.

    ``allan``: ``n`` differences of neighbouring means, of the axis that has fewer; ``lo`` and
    ``hi`` hold the true deviation with 68 % confidence. With ``floor``: ``claims``, one an axis.
    """
    document: dict[str, Any] = {
        "schema": SCHEMA,
        "n": record.n,
        "flagged": record.flagged,
        "over_s": rounded(record.over_s),
        "interval_s": rounded(record.interval_s),
        "gaps": record.gaps,
        "longest_gap_s": rounded(record.longest_gap_s),
        **_axis("x", record.x),
        **_axis("y", record.y),
        "allan": _allan(record.x.allan, record.y.allan),
    }
    if floor is not None:
        document["claims"] = [
            {
                "axis": claim.axis,
                "change_arcsec": rounded(claim.change_arcsec),
                "limit_arcsec": rounded(claim.limit_arcsec),
                "over_s": rounded(claim.over_s),
                "verdict": claim.verdict,
                "words": claim.words(floor),
            }
            for claim in claim_drift(record.change, floor)
        ]
    return document


def _axis(name: str, axis: AxisDrift) -> dict[str, Number | int]:
    return {
        f"{name}_n": axis.n,
        f"{name}_rate_arcsec_per_h": rounded(axis.rate_arcsec_per_h),
        f"{name}_rate_sd_arcsec_per_h": rounded(axis.rate_sd_arcsec_per_h),
        f"{name}_mean_arcsec": rounded(axis.mean_arcsec),
        f"{name}_sd_arcsec": rounded(axis.sd_arcsec),
        f"{name}_range_arcsec": rounded(axis.range_arcsec),
    }


def _allan(x: Allan | None, y: Allan | None) -> dict[str, list[Any]]:
    there = [one for one in (x, y) if one is not None]
    taus = sorted({float(tau) for one in there for tau in one.tau_s})
    found: dict[str, list[Any]] = {
        "tau_s": [rounded(tau) for tau in taus],
        "n": [int(min(n for one in there for n in one.n[one.tau_s == tau])) for tau in taus],
    }
    for name, one in (("x", x), ("y", y)):
        low, high = (np.array([]),) * 2 if one is None else one.interval()
        middle = np.array([]) if one is None else one.deviation
        for column, values in (("", middle), ("_lo", low), ("_hi", high)):
            of = {} if one is None else dict(zip(one.tau_s.tolist(), values.tolist(), strict=True))
            found[f"{name}{column}_arcsec"] = [
                rounded(of[tau]) if tau in of else None for tau in taus
            ]
    return found
