"""A strip as the fit sees it, once it is known what is wrong with it.

Where the light is uneven, slices are freed of their grounds and expected at their contrast. Pixels
that stand out from those of the same phase (dust, a hot pixel, a compression block) or are clipped
are left out one by one. Sections where the arm is not there, or off its line by more than
noise, are left out.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from readout.model import F64
from readout.sighting.beside import fits_badly, line_beside
from readout.sighting.fold import Fold, Strip, fold_strip
from readout.sighting.lopsided import lopsidedness
from readout.sighting.sections import Light, Sections, sections_of
from readout.sighting.shape import Beside, Shape
from readout.sighting.solve import Solution, solve_fold

OUTLIER = 5.0
"""a pixel this many of its sds from its like is none of the arm's: 1 in 2 million by chance"""
OFF_LINE = 4.5
"""so many sds of its place off the line, or of their usual scatter, a section is not the arm's"""


@dataclass(frozen=True, slots=True)
class Look:
    """Slices of a strip, what is known of each, and the fit to them.

    ``background`` (levels), ``gradient`` (levels per pixel across), both (slices,): how much more
    there is than on the arm at large. ``contrast`` (slices,): relative to the arm's. ``spoilt``
    (slices, columns): pixels left out. ``levels``: after all this.
    """

    strip: Strip
    background: F64
    gradient: F64
    contrast: F64
    spoilt: NDArray[np.bool_] | None
    levels: F64
    fold: Fold
    solution: Solution

    @classmethod
    def at_first(cls, strip: Strip, fold: Fold, solution: Solution) -> Look:
        """Nothing is known yet."""
        slices = len(strip.rows)
        return cls(
            strip,
            np.zeros(slices),
            np.zeros(slices),
            np.ones(slices),
            missing_in(strip),
            strip.levels,
            fold,
            solution,
        )

    def expected(self) -> F64:
        """What the fit expects, (slices, columns)."""
        fold, solution = self.fold, self.solution
        off = self.fold.deviation + solution.turn * self.strip.along
        line = solution.line[fold.group] + off[:, None] * solution.flank[fold.group]
        return np.asarray(solution.ground[fold.group] + self.contrast[:, None] * line)

    def residual(self) -> F64:
        """Levels less what the fit expects, (slices, columns); 0 where a pixel is left out."""
        residual = self.levels - self.expected()
        return residual if self.spoilt is None else np.where(self.spoilt, 0.0, residual)

    def sections(self, residual: F64) -> Sections | None:
        """The arm piece by piece; None of one too short for that."""
        return sections_of(self.strip, residual, self.contrast, self.fold, self.solution)

    @property
    def lit_slices(self) -> int:
        """About how many slices the arm is seen in, by their height over the ground."""
        solution, group = self.solution, self.fold.group
        middle = np.abs(self.strip.offsets) <= max(1.0, solution.shape.half_width)
        height = (self.levels - solution.ground[group])[:, middle].mean(axis=1)
        height *= math.copysign(1.0, solution.shape.contrast)
        best = np.sort(height)[int(0.9 * (len(height) - 1))]
        return int(np.count_nonzero(height > best / 2))

    def light(self, sections: Sections) -> Light:
        """Contrast along the arm, relative to its mean."""
        arm = self.solution.shape.contrast
        known = np.add.reduceat(self.contrast, sections.first) / np.diff(
            np.append(sections.first, sections.slices)
        )
        return Light(
            sections.along + self.strip.line.middle_y,
            known + sections.contrast / arm,
            sections.contrast_sd / abs(arm),
            bool(np.any(self.contrast != 1.0)),
        )

    def improved(self, residual: F64, sections: Sections) -> Look | None:
        """A better look, or None if nothing was found to improve or the rest cannot be fitted."""
        background, gradient, contrast = self.background, self.gradient, self.contrast
        spoilt = self.spoilt
        keep = sections.on_line(OFF_LINE)
        lit = sections.lit(self.solution.shape.contrast)
        if sections.uneven and not lit.all():
            keep &= lit  # what is left may be even
        elif sections.uneven:
            background = background + sections.at(self.strip.along, sections.background)
            gradient = gradient + sections.at(self.strip.along, sections.gradient)
            arm = self.solution.shape.contrast
            contrast = contrast + sections.at(self.strip.along, sections.contrast) / arm
        elif (outliers := self._standing_out(residual)).any():
            spoilt = outliers if spoilt is None else spoilt | outliers
        keep_slices = sections.of_slices(keep)
        shape = self.solution.shape
        if not sections.uneven and keep.all() and spoilt is self.spoilt:
            beside = self._beside()
            if beside is None:
                return None
            with_it = self._fitted_anew(
                background, gradient, contrast, spoilt, keep_slices, replace(shape, beside=beside)
            )
            return (
                with_it if with_it and with_it.solution.misfit < self.solution.misfit / 2 else None
            )
        if np.count_nonzero(keep_slices) < 8:
            return None
        return self._fitted_anew(background, gradient, contrast, spoilt, keep_slices, shape)

    def _standing_out(self, residual: F64) -> NDArray[np.bool_]:
        """Pixels far from those of the same phase and column."""
        fold, solution = self.fold, self.solution
        from_like = residual - (solution.left / fold.n)[fold.group]
        outliers = np.abs(from_like) * np.sqrt(solution.weight)[fold.group] > OUTLIER
        return outliers if self.spoilt is None else outliers & ~self.spoilt

    def _beside(self) -> Beside | None:
        """A line beside the arm not known before, where the profile fits badly."""
        if self.solution.shape.beside is not None or not fits_badly(self.solution):
            return None
        return line_beside(self.fold, self.strip.line.cosine, self.solution)

    @property
    def lopsidedness(self) -> tuple[float, int]:
        """Reduced chi-square by which the profile's sides differ, 1 for noise, and its freedom.

        Not looked for where the profile as a whole fits.
        """
        if not fits_badly(self.solution, sure=2.0):
            return 1.0, 1
        return lopsidedness(self.fold, self.strip.line.cosine, self.solution)

    @property
    def hollow(self) -> float:
        """By how much of its height the profile is lower in its middle than a line is."""
        if not fits_badly(self.solution):
            return 0.0
        fold, solution = self.fold, self.solution
        at = fold.u - self.strip.line.cosine * solution.shift
        middle = (np.abs(at) < 0.5 * math.sqrt(solution.shape.spread)) & (fold.seen > 0)
        if not middle.any():
            return 0.0
        return -float((solution.left / fold.n)[middle].mean() / solution.line[middle].mean())

    def _fitted_anew(
        self,
        background: F64,
        gradient: F64,
        contrast: F64,
        spoilt: NDArray[np.bool_] | None,
        keep: NDArray[np.bool_],
        shape: Shape,
    ) -> Look | None:
        """The same strip with the slices to ``keep``, cleaned and fitted."""
        mean_contrast = float(contrast[keep].mean())
        if not mean_contrast > 0:
            return None
        arm = self.solution.shape.contrast * mean_contrast
        levels = self.strip.levels - background[:, None]
        levels -= gradient[:, None] * self.fold.u[self.fold.group]
        contrast = contrast / mean_contrast
        strip, levels, contrast = self.strip.only(keep), levels[keep], contrast[keep]
        spoilt = None if spoilt is None else spoilt[keep]
        fold = fold_strip(strip, levels, contrast if np.any(contrast != 1.0) else None, spoilt)
        moved = strip.line.middle_y - self.strip.line.middle_y
        anew = solve_fold(
            fold,
            strip.line.cosine,
            replace(shape, contrast=arm),
            strip.depth,
            known=True,
            shift=self.solution.shift + self.solution.turn * moved,
            turn=self.solution.turn,
        )
        if anew is None:
            return None
        return Look(
            strip,
            background[keep],
            gradient[keep],
            contrast,
            spoilt,
            levels,
            fold,
            anew,
        )


def missing_in(strip: Strip) -> NDArray[np.bool_] | None:
    """Pixels of a strip that are known from the start to be of no use; None if there are none."""
    if strip.clipped is None or strip.missing is None:
        return strip.missing if strip.clipped is None else strip.clipped
    return np.asarray(strip.clipped | strip.missing)
