"""The nudge test and the foil test: which way the axes run, shown at the mirror."""

from __future__ import annotations

import json
from dataclasses import replace
from pathlib import Path
from typing import Annotated, Literal

from fastapi import APIRouter
from pydantic import BaseModel, ConfigDict, Field
from typing_extensions import TypedDict

from readout.angle import Calibration
from readout.angle.signs import Foil, SignVerdict
from readout.files.calibration_file import calibration_document
from readout.files.calibration_shelf import keep_calibration
from readout.instrument import Instrument
from readout.instrument.known_points import plain_id
from readout.instrument.sign_test import SignState, SignTest
from readout.rows import Number, rounded
from readout.service.calibrating_routes import FinishedMessage
from readout.service.calibration_routes import kept_message
from readout.service.control import Control
from readout.service.feed import Feed
from readout.utc import utc_text

Millimetres = Annotated[float, Field(gt=0, le=1e5)]
Sd = Annotated[float, Field(ge=0, le=1e4)]


class _Body(BaseModel):
    model_config = ConfigDict(extra="forbid", allow_inf_nan=False)


class EdgeBody(_Body):
    """The edge that has been pressed towards the instrument."""

    edge: Literal["top", "right"]


class FoilBody(_Body):
    """What lies under the foot that is farther from the instrument, and the feet's distance."""

    thickness_mm: Millimetres
    base_mm: Millimetres
    thickness_sd_mm: Sd = 0.0
    base_sd_mm: Sd = 0.0


class NameBody(_Body):
    """A name for the calibration that is kept."""

    name: Annotated[str, Field(max_length=80)] = ""


class PushMessage(TypedDict):
    """By how much the reading changed."""

    x_arcsec: Number
    y_arcsec: Number


class FoilMessage(TypedDict):
    """What the foil showed; ``scale``: agrees, half, double or differs."""

    expected_arcsec: Number
    change: PushMessage | None
    ratio: Number
    ratio_u: Number
    scale: str | None
    text: str


class SignsMessage(TypedDict):
    """``signs``: of the calibration in use. ``peak``: the farthest from rest so far, null while no
    rest is taken. ``outcome`` and ``text``: what the pushes say together.
    """

    calibration_id: str | None
    signs: str | None
    resting: bool
    peak: PushMessage | None
    top: PushMessage | None
    right: PushMessage | None
    foil: FoilMessage | None
    outcome: str
    text: str


def sign_routes(
    instrument: Instrument, test: SignTest, control: Control, feed: Feed, folder: Path
) -> APIRouter:
    """Routes of both tests; what they prove is kept in ``folder``."""
    routes = APIRouter(prefix="/api/signs", tags=["calibrations"])

    @routes.get("")
    def get_signs() -> SignsMessage:
        """What has been seen so far."""
        return _message(test.state)

    @routes.post("/rest")
    def post_rest() -> SignsMessage:
        """The mirror rests, with nothing under it; 409 while it moves."""
        return _message(test.rest())

    @routes.post("/pressed")
    def post_pressed(body: EdgeBody) -> SignsMessage:
        """Count the push at this edge since the rest; 422 for a push that shows nothing."""
        return _message(test.pressed(body.edge))

    @routes.post("/foil")
    def post_foil(body: FoilBody) -> SignsMessage:
        """The foil lies under the far foot now; it stands for the push at the top edge."""
        return _message(test.foil(Foil(**body.model_dump())))

    @routes.post("/keep", status_code=201)
    def post_keep(body: NameBody) -> FinishedMessage:
        """Keep the calibration in use with its axes as the pushes showed them, and use it."""
        made = test.shown(name=body.name.strip(), created_utc=utc_text(instrument.now()[1]))
        path, kept = _kept_anew(folder, made)
        why_not = control.use_calibration(path)
        feed.announce()
        return {
            "kept": kept_message(path, kept, instrument.scale),
            "warnings": list(kept.warnings),
            "used": why_not == "",
            "why_not": why_not,
        }

    @routes.delete("")
    def delete_signs() -> SignsMessage:
        """Forget what has been seen and begin anew."""
        return _message(test.start_over())

    return routes


def _kept_anew(folder: Path, made: Calibration) -> tuple[Path, Calibration]:
    """Under an id that tells what it was made from and when."""
    stamp = "".join(c for c in made.created_utc if c.isdigit())[:14]
    name = str(made.made_from.get("name") or made.method)
    made = replace(made, id=f"{plain_id(name)}-signs-{stamp}")
    text = json.dumps(calibration_document(made), indent=2, allow_nan=False) + "\n"
    return keep_calibration(folder, text.encode())


def _pair(values: tuple[float, float] | None) -> PushMessage | None:
    if values is None:
        return None
    return {"x_arcsec": rounded(values[0]), "y_arcsec": rounded(values[1])}


def _push(verdict: SignVerdict | None) -> PushMessage | None:
    return None if verdict is None else _pair(verdict.change.values)


def _foil(state: SignState) -> FoilMessage | None:
    verdict = state.tests.get("foil")
    if verdict is None or state.foil is None:
        return None
    scale = verdict.scale
    return {
        "expected_arcsec": rounded(state.foil.tilt_arcsec),
        "change": _push(verdict),
        "ratio": None if scale is None else rounded(scale.ratio),
        "ratio_u": None if scale is None else rounded(scale.ratio_u),
        "scale": None if scale is None else scale.says.value,
        "text": verdict.text,
    }


def _message(state: SignState) -> SignsMessage:
    return {
        "calibration_id": None if state.calibration is None else state.calibration.id,
        "signs": None if state.calibration is None else state.calibration.signs,
        "resting": state.resting,
        "peak": _pair(state.peak),
        "top": _push(state.tests.get("top")),
        "right": _push(state.tests.get("right")),
        "foil": _foil(state),
        "outcome": state.outcome.value,
        "text": state.text,
    }
