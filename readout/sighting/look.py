"""A strip as the fit sees it, once it is known what is wrong with it.

Where the light is uneven, slices are brought to one height and count by their contrast. Pixels
that stand out from those of the same phase (dust, a hot pixel, a compression block) or are clipped
give way to what the fit expects there, as a robust fit by modified residuals does (P. J. Huber,
Robust Statistics, 1981, 7.8). Sections where the arm is not there, or off its line by more than
noise, are left out.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from readout.model import F64
from readout.sighting.fold import Fold, Strip, fold_strip
from readout.sighting.sections import Sections, sections_of
from readout.sighting.solve import Solution, solve_fold

OUTLIER = 5.0
"""a pixel this many of its sds from its like is none of the arm's: 1 in 2 million by chance"""
OFF_LINE = 4.5
"""so many sds of its place off the line, or of their usual scatter, a section is not the arm's"""
LIT = 0.5
"""a section whose contrast is surely less than this share of the arm's is not of the arm"""


@dataclass(frozen=True, slots=True)
class Look:
    """Slices of a strip, what is known of each, and the fit to them.

    ``background`` (slices,), levels: how much more there is than on the arm at large.
    ``contrast`` (slices,): relative to the arm's. ``spoilt`` (slices, columns): pixels replaced,
    ``clipped``: those at full scale. ``levels``: after all this.
    """

    strip: Strip
    background: F64
    contrast: F64
    spoilt: NDArray[np.bool_]
    clipped: NDArray[np.bool_]
    levels: F64
    fold: Fold
    solution: Solution

    @classmethod
    def at_first(
        cls, strip: Strip, fold: Fold, solution: Solution, clipped: NDArray[np.bool_]
    ) -> Look:
        """Nothing is known but which pixels are clipped."""
        slices = len(strip.rows)
        return cls(
            strip,
            np.zeros(slices),
            np.ones(slices),
            np.zeros_like(clipped),
            clipped,
            strip.levels,
            fold,
            solution,
        )

    def residual(self) -> F64:
        """Levels less what the fit expects, (slices, columns)."""
        fold, solution = self.fold, self.solution
        shift = self.contrast * (fold.deviation + solution.turn * self.strip.along)
        expected = solution.model[fold.group]
        expected += shift[:, None] * solution.flank[fold.group]
        return self.levels - expected

    def sections(self, residual: F64) -> Sections | None:
        """The arm piece by piece; None of one too short for that."""
        return sections_of(self.strip, residual, self.contrast, self.fold, self.solution)

    def improved(self, residual: F64, sections: Sections) -> Look | None:
        """A better look, or None if nothing was found to improve or the rest cannot be fitted."""
        background, contrast = self.background, self.contrast
        spoilt = self.spoilt | self.clipped
        keep = sections.on_line(OFF_LINE)
        if sections.uneven:
            background = background + sections.at(self.strip.along, sections.background)
            arm = self.solution.shape.contrast
            contrast = contrast + sections.at(self.strip.along, sections.contrast) / arm
            keep &= sections.lit(arm, LIT)
        else:
            spoilt |= self._standing_out(residual)
        keep_slices = sections.of_slices(keep)
        if not sections.uneven and keep.all() and not np.any(spoilt & ~self.spoilt):
            return None
        if np.count_nonzero(keep_slices) < 8:
            return None
        return self._fitted_anew(background, contrast, spoilt, keep_slices)

    def _standing_out(self, residual: F64) -> NDArray[np.bool_]:
        """Pixels far from those of the same phase and column."""
        fold, solution = self.fold, self.solution
        mean = (
            fold.level - fold.n * solution.model - solution.turn * solution.flank * fold.ca
        ) / fold.n
        from_like = residual - mean[fold.group]
        return np.abs(from_like) * np.sqrt(solution.weight)[fold.group] > OUTLIER

    def _fitted_anew(
        self, background: F64, contrast: F64, spoilt: NDArray[np.bool_], keep: NDArray[np.bool_]
    ) -> Look | None:
        """The same strip with the slices to ``keep``, levelled, cleaned and fitted."""
        solution, group = self.solution, self.fold.group
        mean_contrast = float(contrast[keep].mean())
        if not mean_contrast > 0:
            return None
        arm = solution.shape.contrast * mean_contrast
        contrast = contrast / mean_contrast
        profile = solution.profile[group]
        levels = self.strip.levels - background[:, None]
        levels -= ((contrast - 1) * arm)[:, None] * profile
        if spoilt.any():
            expected = solution.model[group] + (arm - solution.shape.contrast) * profile
            shift = contrast * (self.fold.deviation + solution.turn * self.strip.along)
            expected += shift[:, None] * solution.flank[group]
            levels = np.where(spoilt, expected, levels)
        strip, levels, contrast = self.strip.only(keep), levels[keep], contrast[keep]
        clipped = self.clipped[keep]
        fold = fold_strip(strip, levels, contrast, clipped if clipped.any() else None)
        anew = solve_fold(
            fold, strip.line.cosine, replace(solution.shape, contrast=arm), strip.depth
        )
        if anew is None:
            return None
        return Look(strip, background[keep], contrast, spoilt[keep], clipped, levels, fold, anew)
