"""One arm: cut a strip along it, solve, cut anew along the better line until it rests.

Then it is looked at piece by piece, and fitted again without what is found wrong with it.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from readout.model import F64, Arm, Pixels
from readout.sighting.fold import DEEPEST, Line, Shadow, cut_strip, fold_strip
from readout.sighting.look import Look, missing_in
from readout.sighting.profile import half_maximum, peak_height
from readout.sighting.sections import Light
from readout.sighting.shape import Shape
from readout.sighting.solve import Solution, solve_fold

CUTS = 6
RESTS_SHIFT_PX = 0.5
RESTS_TURN_PX = 0.1
"""a line that moves less than this, in the middle and at its ends, needs no new strip"""
CROOKED = 25.0
"""an arm whose sections scatter by this factor, in variance, more than noise has marks across it"""
FEW_SLICES = 24
"""an arm with fewer slices on it is cut anew, row by row"""
ROUNDS = 8
"""times an uneven or spoilt arm is looked at anew"""


@dataclass(frozen=True, slots=True)
class ArmFit:
    """A fitted arm: its line, the covariance of (middle_x, slope), its shape, and how it fits.

    ``width_px``: full width at half maximum across the arm; ``peak_contrast``: its height, levels.
    ``explained``: share of the folded profile's variance that the model explains. ``pixel_sd``:
    typical noise of a pixel, levels. ``excess``: factor on the covariance for what the pixels'
    noise does not explain. ``rows``: rows in which the arm is there. ``clipped``: share of the
    strip's pixels at full scale; ``peak``: the brightest. ``lean``: px along x by which the line is
    pulled if its contrast rises by its own size per pixel across it. ``lopsided``: reduced
    chi-square by which its sides differ, ``lopsided_px``: the shift that would make them.
    ``hollow``: dip in the middle of its profile, as a share of its height. ``graduated``: marks
    cross it. ``light``: along the arm.
    """

    line: Line
    cov: F64
    shape: Shape
    width_px: float
    peak_contrast: float
    explained: float
    pixel_sd: float
    excess: float
    rows: float
    clipped: float
    peak: float
    lean: float
    lopsided: float
    lopsided_px: float
    hollow: float
    graduated: bool
    light: Light | None

    def x_var_at(self, y: float) -> float:
        """Variance of the line's x at row ``y``, px^2."""
        along = np.array([1.0, y - self.line.middle_y])
        return float(along @ self.cov @ along)


def fit_arm(
    pixels: Pixels,
    line: Line,
    shape: Shape,
    *,
    known: bool = False,
    full_scale: float = math.inf,
    unusable: NDArray[np.bool_] | None = None,
    shadow: Shadow | None = None,
) -> ArmFit | None:
    """Fit an upright arm near ``line``; for a level one pass the transposed picture.

    ``shape`` is a rough start, or ``known`` to be near in all it says. Pixels at ``full_scale``
    and ``unusable`` ones say nothing. What lies in the ``shadow`` of another arm is left out.
    Returns None where no arm can be fitted: never raises on a bad picture.
    """
    look, deepest = None, DEEPEST
    for _ in range(CUTS):
        half_columns = math.ceil((1.25 * shape.reach_px + 2) / line.cosine)
        strip = cut_strip(
            pixels,
            line,
            half_columns,
            full_scale=full_scale,
            unusable=unusable,
            deepest=deepest,
            shadow=shadow,
        )
        if strip is None:
            return None
        fold = fold_strip(strip, strip.levels, missing=missing_in(strip))
        solution = solve_fold(fold, strip.line.cosine, shape, strip.depth, known=known)
        if solution is None or abs(solution.shift) > half_columns:
            return None
        look = Look.at_first(strip, fold, solution)
        line, shape, known = _moved(strip.line, solution), solution.shape, True
        ends = abs(solution.turn) * float(strip.rows[-1] - strip.rows[0]) / 2
        if abs(solution.shift) < RESTS_SHIFT_PX and ends < RESTS_TURN_PX:
            if strip.depth == 1 or look.lit_slices >= FEW_SLICES:
                break
            deepest = 1
    return None if look is None else _looked_at(look)


def _moved(line: Line, solution: Solution) -> Line:
    return Line(line.middle_x + solution.shift, line.slope + solution.turn, line.middle_y)


def _looked_at(look: Look) -> ArmFit:
    """The arm's fit, improved as long as something is found to improve."""
    strip = look.strip
    clipped = 0.0 if strip.clipped is None else float(np.mean(strip.clipped))
    graduated = False
    for rounds_left in range(ROUNDS, -1, -1):
        residual = look.residual()
        sections = look.sections(residual)
        if sections is not None and look.strip is strip:
            graduated = sections.jagged
        better = look.improved(residual, sections) if sections and rounds_left else None
        if better is None:
            break
        look = better
    solution, shape = look.solution, look.solution.shape
    lopsided, freedom = look.lopsidedness
    excess = max(1.0 if sections is None else sections.excess_variance, lopsided)
    lopsided_px = 0.0
    if lopsided > 1:
        lopsided_px = math.sqrt(float(solution.cov[0, 0]) * lopsided * freedom)
    return ArmFit(
        line=_moved(look.strip.line, solution),
        cov=solution.cov * excess,
        shape=shape,
        width_px=half_maximum(shape.half_width, shape.blur),
        peak_contrast=shape.contrast * peak_height(shape.half_width, shape.blur),
        explained=solution.explained,
        pixel_sd=solution.slice_sd * math.sqrt(strip.depth),
        excess=excess,
        rows=float(len(look.strip.rows) * strip.depth),
        clipped=clipped,
        peak=strip.peak,
        lean=solution.lean,
        lopsided=lopsided,
        lopsided_px=lopsided_px,
        hollow=look.hollow,
        graduated=graduated or (sections is not None and sections.excess_variance > CROOKED),
        light=None if sections is None else look.light(sections),
    )


def arm_of(fit: ArmFit, clockwise: int) -> Arm:
    """A fitted arm as the outside sees it; ``clockwise``: -1 for an upright arm, 1 for a level."""
    return Arm(
        angle_deg=clockwise * math.degrees(math.atan(fit.line.slope)),
        width_px=fit.width_px,
        contrast=fit.peak_contrast,
        background=fit.shape.background,
        line_px=2 * fit.shape.half_width,
        blur_px=fit.shape.blur,
    )


def shape_of(arm: Arm) -> Shape:
    """The shape of an arm fitted before."""
    half_width = arm.line_px / 2
    contrast = arm.contrast / peak_height(half_width, arm.blur_px)
    return Shape(arm.background, 0.0, contrast, half_width, arm.blur_px)


def known(arm: Arm) -> bool:
    """True of an arm whose shape is known well enough to start from."""
    values = (arm.angle_deg, arm.contrast, arm.background, arm.line_px, arm.blur_px)
    return all(map(math.isfinite, values)) and arm.line_px > 0 and arm.blur_px > 0
