"""``set.toml`` of a calibration set: what is known of camera, optics, standard and signs."""

from __future__ import annotations

import tomllib
from pathlib import Path
from typing import Annotated, Literal, Self

from pydantic import BaseModel, ConfigDict, Field, ValidationError, model_validator

from readout.angle import Mounting
from readout.angle.graduation_division import Division, MarkedAs, division
from readout.angle.lever import LeverIs
from readout.angle.wedge import WedgeIs
from readout.errors import BadInput
from readout.model import Target

_Positive = Annotated[float, Field(gt=0, allow_inf_nan=False)]
_NotNegative = Annotated[float, Field(ge=0, allow_inf_nan=False)]
_Name = Annotated[str, Field(min_length=1)]


class _Part(BaseModel):
    model_config = ConfigDict(extra="forbid")


class CameraPart(_Part):
    """``[camera]``."""

    pixel_um: _Positive | None = None
    mounting: Mounting = Mounting.STRAIGHT
    own_lens: bool = False


class OpticsPart(_Part):
    """``[optics]``."""

    focal_length_mm: _Positive | None = None


class StagePart(_Part):
    """``[stage]``: what is uncertain in all rows at once, and how a lever settles."""

    scale_rel_sd: _NotNegative = 0.0
    lever_sd_mm: _NotNegative = 0.0
    seating_sd_mm: _NotNegative = 0.0


class WedgePart(_Part):
    """``[wedge]``: its effect on the reading, or the angle and index it follows from."""

    used: WedgeIs
    reading_arcsec: _Positive | None = None
    reading_sd_arcsec: _NotNegative = 0.0
    angle_arcsec: _Positive | None = None
    angle_sd_arcsec: _NotNegative = 0.0
    index: _Positive | None = None
    index_sd: _NotNegative = 0.0
    mark_sd_deg: _NotNegative = 0.0

    @model_validator(mode="after")
    def _one_of_two(self) -> Self:
        by_glass = self.angle_arcsec is not None and self.index is not None
        if (self.reading_arcsec is not None) == by_glass:
            raise ValueError("give either reading_arcsec, or angle_arcsec and index")
        return self


class GraduationPart(_Part):
    """``[graduation]``: what a division means, and in which frame the scale is seen."""

    file: _Name | None = None
    spacing_arcsec: _Positive | None = None
    marked_as: MarkedAs | None = None
    spacing_um: _Positive | None = None
    focal_length_mm: _Positive | None = None
    rel_sd: _NotNegative | None = None
    focal_length_rel_sd: _NotNegative | None = None

    @property
    def division(self) -> Division:
        """Raises BadInput where something is missing, contradictory or impossible."""
        return division(
            spacing_arcsec=self.spacing_arcsec,
            marked_as=self.marked_as,
            spacing_um=self.spacing_um,
            focal_length_mm=self.focal_length_mm,
            rel_sd=self.rel_sd,
            focal_length_rel_sd=self.focal_length_rel_sd,
        )


class FixedPart(_Part):
    """``[fixed]``: a frame taken with the mirror covered."""

    file: _Name


class NudgePart(_Part):
    """``[[nudge]]``: two frames, the mirror at rest and an edge pressed towards the instrument."""

    edge: Literal["top", "right"]
    before: _Name
    after: _Name
    done_utc: str = ""


class FoilPart(_Part):
    """``[[foil]]``: two frames, without and with a foil under the far foot of a carriage."""

    thickness_mm: _Positive
    thickness_sd_mm: _NotNegative = 0.0
    base_mm: _Positive
    base_sd_mm: _NotNegative = 0.0
    before: _Name
    after: _Name
    done_utc: str = ""


class AxesPart(_Part):
    """``[axes]``: frames of one move of the machine about a single axis, growing tilt."""

    single_axis: Literal["x", "y"]
    files: Annotated[tuple[_Name, ...], Field(min_length=2)]


class SetAbout(_Part):
    """The whole of ``set.toml``."""

    target: Target = Target.CROSSHAIR
    note: str = ""
    lever_is: LeverIs = LeverIs.ON_TWO_SUPPORTS
    camera: CameraPart = CameraPart()
    optics: OpticsPart = OpticsPart()
    stage: StagePart = StagePart()
    wedge: WedgePart | None = None
    graduation: GraduationPart | None = None
    fixed: FixedPart | None = None
    nudge: tuple[NudgePart, ...] = ()
    foil: tuple[FoilPart, ...] = ()
    axes: AxesPart | None = None

    @property
    def other_files(self) -> tuple[str, ...]:
        """Frames named here and not in the table."""
        tests = [
            *(name for nudge in self.nudge for name in (nudge.before, nudge.after)),
            *(name for foil in self.foil for name in (foil.before, foil.after)),
        ]
        named = [p.file for p in (self.fixed, self.graduation) if p is not None and p.file]
        return (*named, *tests, *(() if self.axes is None else self.axes.files))


def read_about(path: Path) -> SetAbout:
    """What ``path`` says; a missing file says nothing. Raises BadInput, one line, if it cannot be
    used.
    """
    try:
        document = tomllib.loads(path.read_text(encoding="utf-8"))
    except FileNotFoundError:
        return SetAbout()
    except (OSError, ValueError) as error:
        raise BadInput(f"cannot read {path} ({error}): mend it or take it away") from error
    except RecursionError:
        raise BadInput(f"cannot read {path} (nested without end): mend it") from None
    try:
        about = SetAbout.model_validate(document)
    except ValidationError as error:
        first = error.errors()[0]
        where = ".".join(str(part) for part in first["loc"])
        what = first["msg"].removeprefix("Value error, ")
        raise BadInput(f"{path}: {where}: {what[:1].lower()}{what[1:]}") from error
    if about.graduation is not None:
        try:
            _ = about.graduation.division  # what a division means is asked before anything is done
        except BadInput as error:
            raise BadInput(f"{path}: graduation: {error}") from None
    return about
