"""A calibration from mirror tilts known up to a common zero, whichever way they came about.

A small-angle generator, a certified stage, the two faces of a certified wedge, a lever raised by
gauge blocks, a wedge turned in the beam: each gives a ``TiltSet``. The fit has residuals on both
sides (``both_sides``); p0 stays at the picture's centre; the distortion k1 is fitted only where the
data demand it. The stage thereby defines the axes.
"""

from __future__ import annotations

import math
from dataclasses import replace
from typing import NoReturn

import numpy as np

from readout.angle.both_sides import BothSides, fit_both_sides
from readout.angle.calibration import Calibration, matrix_rows
from readout.angle.outliers import (
    Agreement,
    OffRow,
    agreement,
    contradicted_rows,
    slip,
    widening,
)
from readout.angle.tilt_model import TiltModel, choose_model
from readout.angle.tilt_set import Camera, SharedInput, TiltSet
from readout.errors import BadInput
from readout.model import F64
from readout.units import signed

WORST_SCALE_SD = 0.2
"""a focal length less certain than this share is no calibration"""
LEAST_FALL = 9.0
"""by so much must the sum of squares fall for a distortion: three standard uncertainties"""
LEVELS = 3
BALANCE = 1 / 3
"""tilts reach to both sides if the shorter side is this share of the longer"""
UNHEARD_ARCSEC = 1e7
"""a row this uncertain has no say"""
SAME_LEVEL = 0.02
"""tilts nearer than this share of the whole range count as one level"""

__all__ = ["Camera", "SharedInput", "TiltSet", "calibrate_known_tilts"]


def calibrate_known_tilts(
    tilts: TiltSet,
    camera: Camera,
    *,
    scale_rel_sd: float = 0.0,
    created_utc: str = "",
    calibration_id: str = "",
    way: str = "known tilts",
) -> Calibration:
    """Fit the calibration to a set of known tilts.

    ``scale_rel_sd``: relative standard uncertainty of the stage's scale, common to all rows and
    therefore not averaged down, besides what the set shares. The covariance claimed is that of the
    weights; where the residuals scatter more than that allows (chi-square test at 5 %) the part of
    the rows is widened by the Birge ratio (R. T. Birge, Phys. Rev. 40 (1932) 207), and a warning
    says so. No row is ever left out: those that the others contradict are named.

    Raises
    ------
    BadInput
        If the rows do not determine the calibration, or one of them is plainly a slip: the line
        names the row and says what is missing.
    """
    if scale_rel_sd > 0:
        whole = SharedInput("scale", scale_rel_sd * tilts.known_arcsec)
        tilts = replace(tilts, shared=(*tilts.shared, whole))
    model = choose_model(tilts, camera, way)
    fit = fit_both_sides(tilts, camera, model)
    found = slip(contradicted_rows(fit, agreement(fit)), tilts.tilt_arcsec)
    if found is not None:
        _refuse_slip(tilts, camera, model, *found)
    fit = _with_distortion(tilts, camera, model, fit) or fit
    agreed = agreement(fit)
    off_rows = contradicted_rows(fit, agreed)
    widened = widening(agreed.chi_square, agreed.freedom)
    calibration = _calibration(tilts, camera, model, fit, widened)
    _refuse_uncertain(tilts, calibration, agreed)
    return replace(
        calibration,
        id=calibration_id,
        created_utc=created_utc,
        residuals=tuple(_residual_rows(tilts, fit, off_rows)),
        warnings=tuple(_warnings(tilts, model, calibration, fit, agreed, off_rows, widened)),
    )


def _calibration(
    tilts: TiltSet, camera: Camera, model: TiltModel, fit: BothSides, widened: float
) -> Calibration:
    """The parameters with their covariance."""
    flat, by_parameter = model.matrix(fit.parameters)
    to_seven = np.zeros((7, len(fit.parameters)))
    to_seven[:4, : model.m] = by_parameter
    if fit.k1_at is not None:
        to_seven[6, fit.k1_at] = 1.0
    cov = to_seven @ (widened**2 * fit.cofactor + fit.shared_cov) @ to_seven.T
    residual = fit.residual_arcsec[fit.used]
    return Calibration(
        id="",
        created_utc="",
        method=model.method,
        matrix=matrix_rows(flat.reshape(2, 2)),
        p0_px=camera.centre_px,
        k1=0.0 if fit.k1_at is None else float(fit.parameters[fit.k1_at]),
        image_width_px=camera.image_width_px,
        image_height_px=camera.image_height_px,
        pitch_um=camera.pitch_um,
        n=len(tilts.names),
        param_cov=tuple(tuple(row) for row in ((cov + cov.T) / 2).tolist()),
        residual_rms_arcsec=math.sqrt(float(np.mean(residual**2))),
    )


def _with_distortion(
    tilts: TiltSet, camera: Camera, model: TiltModel, plain: BothSides
) -> BothSides | None:
    """The fit with k1 free, if the data demand it.

    They do where each axis has three levels that reach to both sides of the optical axis, and the
    sum of squares falls by more than 9, in units of the scatter that is left.
    """
    offset = np.where(plain.used, plain.parameters[model.offset], np.nan)
    absolute = tilts.tilt_arcsec + offset
    if plain.freedom < 2 or not all(_levels_on_both_sides(column) for column in absolute.T):
        return None
    try:
        bent = fit_both_sides(tilts, camera, model, with_k1=True)
    except BadInput:  # the rows do not tell it from the scale
        return None
    before, after = agreement(plain), agreement(bent)
    scatter = max(1.0, after.chi_square / after.freedom)
    return bent if before.chi_square - after.chi_square > LEAST_FALL * scatter else None


def _levels_on_both_sides(tilt_arcsec: F64) -> bool:
    known = np.sort(tilt_arcsec[np.isfinite(tilt_arcsec)])
    if len(known) < LEVELS:
        return False
    below, above = -known[0], known[-1]
    levels = 1 + int(np.sum(np.diff(known) > SAME_LEVEL * np.ptp(known)))
    return levels >= LEVELS and min(below, above) >= BALANCE * max(below, above) > 0


def _refuse_slip(tilts: TiltSet, camera: Camera, model: TiltModel, row: int, axis: int) -> NoReturn:
    """Say what the other rows make of this one."""
    unheard = np.where(np.arange(len(tilts.names)) == row, UNHEARD_ARCSEC, tilts.sd_arcsec)
    others = fit_both_sides(replace(tilts, sd_arcsec=unheard), camera, model)
    said = float(tilts.tilt_arcsec[row, axis])
    meant = said + float(others.residual_arcsec[row, axis])
    times = f" ({said / meant:.3g} times as much)" if meant / (said or 1.0) > 0.05 else ""
    raise BadInput(
        f"{tilts.names[row]} is said to be at {'XY'[axis]} {signed(said, 1)}″{times}, where "
        f"the other rows make it {signed(meant, 1)}″: correct this row or take it out"
    )


def _refuse_uncertain(tilts: TiltSet, calibration: Calibration, agreed: Agreement) -> None:
    share = calibration.focal_length_px_sd / calibration.focal_length_px
    if share <= WORST_SCALE_SD:
        return
    if agreed.freedom and agreed.chi_square > 100 * agreed.freedom:
        raise BadInput(
            "the rows contradict each other, and no single one is to blame, most so "
            f"{_worst_two(tilts, agreed)}: check each row against its frame, or add frames"
        )
    raise BadInput(
        "the tilts are too small for their uncertainty to give a scale: take points further "
        "apart, or know them better"
    )


def _worst_two(tilts: TiltSet, agreed: Agreement) -> str:
    """The two rows with the largest residuals: exchanged frames are no single row's fault."""
    worst = np.argsort(-np.sum(agreed.whitened**2, axis=1), kind="stable")[:2]
    return " and ".join(tilts.names[row] for row in sorted(worst))


def _residual_rows(
    tilts: TiltSet, fit: BothSides, off_rows: list[OffRow]
) -> list[dict[str, object]]:
    off = {item.row: item.off_sd for item in off_rows}
    rows: list[dict[str, object]] = []
    for i, name in enumerate(tilts.names):
        left = fit.residual_arcsec[i]
        rows.append(
            {
                "file": name,
                "x_px": float(tilts.position_px[i, 0]),
                "y_px": float(tilts.position_px[i, 1]),
                "x_residual_arcsec": None if math.isnan(left[0]) else float(left[0]),
                "y_residual_arcsec": None if math.isnan(left[1]) else float(left[1]),
                "outlier": i in off,
            }
        )
    return rows


def _warnings(
    tilts: TiltSet,
    model: TiltModel,
    calibration: Calibration,
    fit: BothSides,
    agreed: Agreement,
    off_rows: list[OffRow],
    widened: float,
) -> list[str]:
    found = ["signs unproven: nudge the mirror and compare"]
    if model.m == 2:
        found.append("one axis only: square pixels and the mounting are taken for granted")
    if fit.k1_at is not None:
        sd = math.sqrt(calibration.param_cov[6][6])
        found.append(f"the data demand a distortion: k1 = {calibration.k1:.3g} ± {sd:.2g}")
    if fit.freedom == 0:
        found.append("as many unknowns as values: nothing checks this calibration")
    elif widened > 1:
        found.append(
            "residuals are larger than their uncertainties allow: "
            f"the claimed ones are widened {widened:.1f} times"
            + ("" if off_rows else f"; the largest are of {_worst_two(tilts, agreed)}")
        )
    found += [
        f"{tilts.names[item.row]} is {item.off_sd:.1f} sd off what the other rows make it: look "
        "at this frame and its row; it was not left out"
        for item in off_rows
    ]
    return found
