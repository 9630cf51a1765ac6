"""Which calibration the pictures of a source are read with."""

from __future__ import annotations

from dataclasses import dataclass

from readout.angle import Calibration, Mounting, nominal_calibration
from readout.errors import BadInput
from readout.model import Target


@dataclass(frozen=True, slots=True)
class Optics:
    """What a nominal calibration is made from."""

    focal_length_mm: float
    pitch_um: float
    mounting: Mounting = Mounting.STRAIGHT


def calibration_for(
    scale: Calibration | Optics | None,
    own: Calibration | None,
    *,
    size_px: tuple[int, int],
    target: Target,
    created_utc: str,
) -> Calibration | None:
    """A calibration given comes first, then the source's ``own``, then a nominal one, else none.

    Raises BadInput for a calibration of another picture size or target.
    """
    match scale:
        case Calibration() as calibration:
            refuse_unfit(calibration, *size_px, target)
            return calibration
        case _ if own is not None:
            return own
        case Optics() as optics:
            return nominal_calibration(
                focal_length_mm=optics.focal_length_mm,
                pitch_um=optics.pitch_um,
                mounting=optics.mounting,
                image_width_px=size_px[0],
                image_height_px=size_px[1],
                target=target,
                created_utc=created_utc,
            )
    return None


def refuse_unfit(calibration: Calibration, width_px: int, height_px: int, target: Target) -> None:
    """Raise BadInput if ``calibration`` was made for another picture size or target."""
    made_for = calibration.image_width_px, calibration.image_height_px
    if made_for != (width_px, height_px):
        raise BadInput(
            f"calibration {calibration.id} is for pictures of {made_for[0]} × {made_for[1]} px, "
            f"these are {width_px} × {height_px} px: calibrate this size or choose the other file"
        )
    if calibration.target is not target:
        raise BadInput(
            f"calibration {calibration.id} is for the target {calibration.target.value}, "
            f"not {target.value}: choose the target or the calibration that fits"
        )
