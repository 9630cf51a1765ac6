"""All returns in a picture of which nothing is known: the main one, and what else could be one."""

from __future__ import annotations

import math
from dataclasses import dataclass

from readout.model import Return
from readout.sighting.arm import ArmFit
from readout.sighting.crossing import Cross
from readout.sighting.find import find_arms
from readout.sighting.fold import Line
from readout.sighting.pairing import both_ways, pairs, same_line
from readout.sighting.reticle import Picture
from readout.sighting.rough import RoughArm, RoughArms
from readout.sighting.shape import Shape

MOST_PAIRS = 6
"""pairs of rough arms tried for the main return, the strongest first"""
LEAST_SHARE = 0.02
"""a line with less than this share of the main arm's contrast is left unmentioned"""
START_BLUR_PX = 1.5
PARALLEL_RAD = math.radians(15.0)
"""lines of one reticle seen twice are parallel; a line across the others is none"""


@dataclass(frozen=True, slots=True)
class Found:
    """What a search gives: the main return or None, lone arms, and the other lines.

    ``upright``, ``level``: an arm without a partner. ``other_uprights``, ``other_levels``: lines
    beside those of the main return.
    """

    main: Cross | None
    upright: ArmFit | None = None
    level: ArmFit | None = None
    other_uprights: tuple[ArmFit, ...] = ()
    other_levels: tuple[ArmFit, ...] = ()

    @property
    def others(self) -> tuple[Return, ...]:
        """The other crossings, brightest first.

        The brightest other upright line belongs to the brightest other level one, and so on; what
        is left over lies on the main return's own arm of the other direction.
        """
        if self.main is None:
            return ()
        count = max(len(self.other_uprights), len(self.other_levels))
        crosses = [
            Cross(
                self.other_uprights[k] if k < len(self.other_uprights) else self.main.upright,
                self.other_levels[k] if k < len(self.other_levels) else self.main.level,
            )
            for k in range(count)
        ]
        return tuple(self._return(cross) for cross in crosses)

    def _return(self, cross: Cross) -> Return:
        assert self.main is not None
        main = self.main
        shares = [
            abs(arm.peak_contrast / of_main.peak_contrast)
            for arm, of_main in ((cross.upright, main.upright), (cross.level, main.level))
            if arm is not of_main
        ]
        return Return(*cross.point(), share=max(shares), lone=len(shares) == 1)


def search(picture: Picture, known: Cross | None = None) -> Found:
    """Look the whole picture over; ``known``: the main return, if it has been found already."""
    height, width = picture.pixels.shape
    arms = both_ways(find_arms(picture.searchable), width, height)
    main = known or _strongest(picture, arms)
    if main is None:
        upright = _first(picture, arms.uprights, is_level=False)
        level = _first(picture, arms.levels, is_level=True)
        return Found(None, upright, level)
    return Found(
        main,
        other_uprights=_others(picture, arms.uprights, main, height, is_level=False),
        other_levels=_others(picture, arms.levels, main, width, is_level=True),
    )


def _strongest(picture: Picture, arms: RoughArms) -> Cross | None:
    for upright, level in pairs(arms)[:MOST_PAIRS]:
        cross = picture.fit_both(upright.line, level.line, _start(upright), _start(level))
        if cross is not None:
            return cross
    return None


def _start(arm: RoughArm) -> Shape:
    """A rough shape: only the sign of the contrast and the width matter."""
    return Shape(0.0, 0.0, float(arm.polarity), max(0.5, arm.width_px / 2), START_BLUR_PX)


def _first(picture: Picture, arms: tuple[RoughArm, ...], *, is_level: bool) -> ArmFit | None:
    """The strongest line that is an arm."""
    for arm in arms:
        fit = picture.fit(arm.line, _start(arm), is_level=is_level)
        if fit is not None:
            return fit
    return None


def _others(
    picture: Picture, arms: tuple[RoughArm, ...], main: Cross, length: int, *, is_level: bool
) -> tuple[ArmFit, ...]:
    """Lines of the main return's polarity that are not its own, brightest first."""
    of_main = main.level if is_level else main.upright
    known: list[Line] = [of_main.line]
    fits: list[ArmFit] = []
    for arm in arms:
        if arm.polarity * of_main.shape.contrast < 0 or _among(arm.line, known, length):
            continue
        if abs(math.atan(arm.line.slope) - math.atan(of_main.line.slope)) > PARALLEL_RAD:
            continue
        fit = picture.fit(arm.line, _start(arm), is_level=is_level)
        if fit is None or _among(fit.line, known, length):
            continue
        if abs(fit.peak_contrast / of_main.peak_contrast) >= LEAST_SHARE:
            known.append(fit.line)
            fits.append(fit)
    return tuple(sorted(fits, key=lambda fit: -abs(fit.peak_contrast)))


def _among(line: Line, lines: list[Line], length: int) -> bool:
    return any(same_line(line, other, length) for other in lines)
