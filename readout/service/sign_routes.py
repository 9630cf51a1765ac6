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
from readout.files.calibration_file import calibration_document
from readout.files.calibration_shelf import keep_calibration
from readout.instrument import Instrument
from readout.instrument.known_points import plain_id
from readout.instrument.sign_test import SignState, SignTest
from readout.instrument.signs_seen import Foil, Push
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
    """What the foil showed."""

    expected_arcsec: Number
    expected_sd_arcsec: Number
    push: PushMessage
    right: bool
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
        made = test.proven(name=body.name.strip(), created_utc=utc_text(instrument.now()[1]))
        path, kept = _kept_anew(folder, made, body.name.strip())
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


def _kept_anew(folder: Path, made: Calibration, name: str) -> tuple[Path, Calibration]:
    """Under an id that tells what it was made from and when."""
    stamp = "".join(c for c in made.created_utc if c.isdigit())[:14]
    made = replace(made, id=f"{plain_id(name or made.id)}-signs-{stamp}")
    text = json.dumps(calibration_document(made), indent=2, allow_nan=False) + "\n"
    return keep_calibration(folder, text.encode())


def _push(push: Push | None) -> PushMessage | None:
    if push is None:
        return None
    return {"x_arcsec": rounded(push.x_arcsec), "y_arcsec": rounded(push.y_arcsec)}


def _message(state: SignState) -> SignsMessage:
    foil = state.foil
    return {
        "calibration_id": None if state.calibration is None else state.calibration.id,
        "signs": None if state.calibration is None else state.calibration.signs,
        "resting": state.resting,
        "peak": _push(state.peak),
        "top": _push(state.top),
        "right": _push(state.right),
        "foil": None
        if foil is None
        else {
            "expected_arcsec": rounded(foil.foil.tilt_arcsec),
            "expected_sd_arcsec": rounded(foil.foil.tilt_sd_arcsec),
            "push": {
                "x_arcsec": rounded(foil.push.x_arcsec),
                "y_arcsec": rounded(foil.push.y_arcsec),
            },
            "right": foil.right,
            "text": foil.text,
        },
        "outcome": state.verdict.outcome.value,
        "text": state.verdict.text,
    }
