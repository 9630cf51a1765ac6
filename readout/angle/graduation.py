"""A calibration from the marks of a graduated scale in one frame.

The scale says what a division means (``graduation_division``), the frame where the marks are
(``sighting.graduation``); the fit is in ``graduation_fit``. The scale thereby defines the axes.
"""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import replace

import numpy as np

from readout.angle.calibration import Calibration, matrix_rows
from readout.angle.graduation_division import Division
from readout.angle.graduation_fit import GraduationFit, GraduationProblem
from readout.angle.known_tilts import LEAST_FALL, WORST_SCALE_SD
from readout.angle.outliers import widening
from readout.angle.scales import Ratio, judge_ratio
from readout.angle.tilt_set import Camera
from readout.errors import BadInput
from readout.model import Target
from readout.sighting.graduation import Graduation, Scale

LEAST_MARKS = 5
UNLIKE = 0.03
"""scales at right angles whose divisions differ by this share are not ruled alike"""
MAGNIFIED = 0.05
"""a picture of the marks larger or smaller than they are by this share has a lens before it"""
NOMINAL_REL_SD = 0.01
"""of an engraved focal length (common practice)"""
LEAST_FOR_K1 = 9
BALANCE = 1 / 3
"""marks reach to both sides of the middle if the shorter side is this share of the longer"""


def calibrate_graduation(
    graduation: Graduation,
    means: Division,
    camera: Camera,
    *,
    own_lens: bool = False,
    target: Target = Target.CROSSHAIR,
    created_utc: str = "",
    calibration_id: str = "",
) -> Calibration:
    """Fit the calibration to the marks seen.

    ``own_lens``: the camera looks through a lens of its own, as a webcam at an eyepiece does; then
    its pixels say nothing of the focal plane, and a pitch is refused.

    The covariance is that of the marks' places, widened by the Birge ratio where they lie worse
    than it allows (errors of the ruling, say), plus the uncertainty of the scale as a whole, which
    no number of marks reduces.

    Raises
    ------
    BadInput
        If no scale or too little of one is seen, or the camera's data do not go with the picture:
        one line with the remedy.
    """
    graduation, unlike = _ruled_alike(graduation)
    _refuse_unusable(graduation, means, camera, own_lens=own_lens)
    problem = GraduationProblem(graduation.scales, means.slope, camera)
    fit = problem.solved()
    if _reaches_both_sides(graduation.scales, camera):
        bent = problem.solved(with_k1=True)
        fit = bent if _fall(fit, bent) > LEAST_FALL else fit
    widened = widening(fit.chi_square, fit.freedom)
    cov = fit.to_seven @ (widened**2 * fit.linear.cofactor) @ fit.to_seven.T
    whole = np.array([*fit.matrix.ravel(), 0.0, 0.0, -2 * fit.k1])
    cov = cov + (means.rel_sd or 0.0) ** 2 * np.outer(whole, whole)
    rows = problem.residual_rows(fit)
    calibration = Calibration(
        id=calibration_id,
        created_utc=created_utc,
        method=problem.method,
        matrix=matrix_rows(fit.matrix),
        p0_px=camera.centre_px,
        image_width_px=camera.image_width_px,
        image_height_px=camera.image_height_px,
        k1=fit.k1,
        param_cov=tuple(tuple(row) for row in ((cov + cov.T) / 2).tolist()),
        target=target,
        pitch_um=camera.pitch_um,
        residuals=tuple(row for row, _ in rows),
        residual_rms_arcsec=math.sqrt(sum(left**2 for _, left in rows) / len(rows)),
        n=len(rows),
        made_from={"division": means.told, "own_lens": own_lens},
    )
    share = calibration.focal_length_px_sd / calibration.focal_length_px
    if share > WORST_SCALE_SD:
        raise BadInput(
            "the marks are too uncertain to give a scale: focus on them, light them evenly, or "
            "have more of them in view"
        )
    found = _warnings(graduation, means, problem, fit, widened)
    return replace(calibration, warnings=(*found, *unlike))


def _ruled_alike(graduation: Graduation) -> tuple[Graduation, tuple[str, ...]]:
    """The scales but the poorer one where their marks are not equally far apart, with a warning."""
    level, upright = graduation.level, graduation.upright
    if level is None or upright is None:
        return graduation, ()
    steps = level.step_px, upright.step_px
    if max(steps) <= (1 + UNLIKE) * min(steps):
        return graduation, ()
    poorer = min(level, upright, key=lambda scale: float(np.sum(1 / np.diag(scale.cov_px2))))
    kept = Graduation(None, upright) if poorer is level else Graduation(level, None)
    told = (
        f"the marks are {steps[0]:.4g} px apart on the level scale and {steps[1]:.4g} px on the "
        f"upright one: one division cannot be both, the {_which(poorer)} one was left out"
    )
    return kept, (told,)


def _refuse_unusable(
    graduation: Graduation, means: Division, camera: Camera, *, own_lens: bool
) -> None:
    scales = graduation.scales
    if not scales:
        raise BadInput(
            "no graduated scale is seen: focus on it and light it evenly, with five marks or more "
            "in view, six pixels or more apart"
        )
    few = [scale for scale in scales if len(scale.numbers) < LEAST_MARKS]
    if few:
        raise BadInput(
            f"only {len(few[0].numbers)} marks of the {_which(few[0])} scale can be used, "
            f"{LEAST_MARKS} are needed: move the return off them, or bring more into view"
        )
    if camera.pitch_um is None:
        return
    if own_lens:
        raise BadInput(
            "a camera with a lens of its own images the scale at a size nobody knows: take "
            "pixel_um out, the marks themselves give the scale"
        )
    if means.spacing_um is not None:
        size = scales[0].step_px * camera.pitch_um / means.spacing_um
        if abs(size - 1) > MAGNIFIED:
            raise BadInput(
                f"on the sensor the marks are {size * means.spacing_um:.4g} µm apart, where "
                f"spacing_um is {means.spacing_um:g}: correct spacing_um or pixel_um, or, if the "
                "camera has a lens of its own, say own_lens = true and take pixel_um out"
            )


def refuse_other_meaning(calibration: Calibration, nominal_focal_length_mm: float) -> None:
    """Raise BadInput where the scale is half or twice what the parts are engraved with.

    That is what taking a mirror's tilt for a beam's angle does, and no focal length is engraved so
    wrong. Needs the pixel pitch; without it nothing is said.
    """
    if calibration.focal_length_mm is None:
        return
    ratio = nominal_focal_length_mm / calibration.focal_length_mm
    verdict = judge_ratio(ratio, NOMINAL_REL_SD * ratio)
    if verdict.says in (Ratio.HALF, Ratio.DOUBLE):
        raise BadInput(
            f"the scale makes the focal length {calibration.focal_length_mm:.4g} mm, nominal are "
            f"{nominal_focal_length_mm:g} mm: {verdict.text}; change marked_as"
        )


def _which(scale: Scale) -> str:
    return "upright" if scale.upright else "level"


def _reaches_both_sides(scales: tuple[Scale, ...], camera: Camera) -> bool:
    """True where one scale has marks enough, well to either side of the middle."""
    for scale in scales:
        axis = 1 if scale.upright else 0
        off = scale.place_px[:, axis] - camera.centre_px[axis]
        least, most = -float(off.min()), float(off.max())
        if len(off) >= LEAST_FOR_K1 and min(least, most) > BALANCE * max(least, most):
            return True
    return False


def _fall(plain: GraduationFit, bent: GraduationFit) -> float:
    """By how much the sum of squares falls, in units of the scatter that is left."""
    return (plain.chi_square - bent.chi_square) / max(1.0, bent.chi_square / bent.freedom)


def _warnings(
    graduation: Graduation,
    means: Division,
    problem: GraduationProblem,
    fit: GraduationFit,
    widened: float,
) -> Iterator[str]:
    yield "signs unproven: nudge the mirror and compare"
    yield f"taken as said: {means.told}"
    if means.rel_sd is None:
        yield "the scale's own uncertainty was not given, so it is not in the claimed one"
    if len(graduation.scales) == 1:
        yield "one scale only: square pixels and the mounting are taken for granted"
    if fit.k1 != 0:
        sd = math.sqrt(fit.linear.cofactor[-1, -1]) * widened
        yield f"the marks demand a distortion: k1 = {fit.k1:.3g} ± {sd:.2g}"
    if any(_fall(fit, curved) > LEAST_FALL for curved in problem.curved(fit)):
        yield (
            "the marks close up towards one side: the camera looks askew at the scale, or its "
            "lens is off centre; set it square"
        )
    if widened > 1:
        yield (
            "the marks lie worse than their uncertainties allow: "
            f"the claimed ones are widened {widened:.1f} times"
        )
    for scale in graduation.scales:
        if scale.left_out:
            numbers = ", ".join(map(str, scale.left_out))
            yield f"left out on the {_which(scale)} scale, spoilt or hidden: marks {numbers}"
