"""A calibration point by point, while the instrument measures.

The mirror is set to a known tilt, the averaged position is taken, and as soon as there are enough
points each shows its residual. Nothing is kept on the disk before the end; what is taken can be
taken back.
"""

from __future__ import annotations

import hashlib
import math
import threading
from dataclasses import dataclass, replace
from enum import StrEnum
from typing import Any

import numpy as np

from readout.angle import (
    Calibration,
    Camera,
    Mounting,
    SharedInput,
    TiltSet,
    calibrate_known_tilts,
)
from readout.angle.expected import ExpectedScale, expected_scale
from readout.angle.lever import LeverIs, LeverRow, lever_tilts
from readout.errors import BadInput, NotNow
from readout.instrument.instrument import Instrument
from readout.instrument.steady import Steadiness, Steady
from readout.model import F64, Target

MOST_POINTS = 200
ANY_SIZE_PX = 1280, 720
"""What a plan is worth does not hang on the picture; where none has come, one is needed."""


class Way(StrEnum):
    """What tilts the mirror."""

    ANGLES = "angles"
    """a small-angle generator or a stage that says angles"""
    LEVER = "lever"
    """a lever on two supports, raised by gauge blocks or feeler gauges"""


@dataclass(frozen=True, slots=True)
class Plan:
    """How the tilts are known.

    ``ANGLES``: ``sd_arcsec`` of one setting, ``scale_rel_sd`` of the scale, common to all.
    ``LEVER``: ``lever_mm`` between the supports with ``lever_sd_mm``, measured along the bar or,
    with ``horizontal``, along the ground; ``height_sd_mm`` of one height.
    """

    way: Way
    sd_arcsec: float = 0.0
    scale_rel_sd: float = 0.0
    lever_mm: float = math.nan
    lever_sd_mm: float = 0.0
    height_sd_mm: float = 0.0
    horizontal: bool = False

    def __post_init__(self) -> None:
        if self.way is Way.LEVER and not self.lever_mm > 0:
            raise BadInput("a lever needs its length: give the distance of its supports in mm")


@dataclass(frozen=True, slots=True)
class Known:
    """A tilt as a person gives it: angles, or the height under one end of the lever and its axis.

    NaN where nothing is known.
    """

    x_arcsec: float = math.nan
    y_arcsec: float = math.nan
    height_mm: float = math.nan
    axis: str = ""


@dataclass(frozen=True, slots=True)
class Point:
    """A known tilt and where the return lay; ``x_arcsec`` and ``y_arcsec`` of the mirror, NaN where
    not known.
    """

    number: int
    known: Known
    x_arcsec: float
    y_arcsec: float
    seen: Steady

    @property
    def name(self) -> str:
        return _name(self.number)


@dataclass(frozen=True, slots=True)
class Progress:
    """Where the procedure stands. ``calibration``: of the points so far; None while they do not
    determine one, and ``lacking`` then says why.
    """

    plan: Plan
    points: tuple[Point, ...]
    calibration: Calibration | None
    lacking: str


class KnownPoints:
    """One such procedure at a time, shared by everybody who looks."""

    def __init__(self, instrument: Instrument, steadiness: Steadiness) -> None:
        self._instrument = instrument
        self._steadiness = steadiness
        self._lock = threading.RLock()
        self._plan: Plan | None = None
        self._camera: tuple[str, Target, Camera] | None = None
        self._points: tuple[Point, ...] = ()
        self._taken = 0

    def begin(self, plan: Plan, *, pitch_um: float | None, mounting: Mounting) -> Progress:
        """Begin anew with ``plan``. Raises NotNow while another one has points, or no picture has
        come.
        """
        now = self._instrument.status()
        if now.source is None or now.image_width_px is None or now.image_height_px is None:
            raise NotNow("no picture has come yet: wait for the first one, then begin")
        camera = Camera(now.image_width_px, now.image_height_px, pitch_um, mounting)
        with self._lock:
            if self._points:
                raise NotNow("points have been taken already: finish them or give them up first")
            self._plan, self._camera = plan, (now.source, self._instrument.target, camera)
            self._taken = 0
        return self.progress

    @property
    def progress(self) -> Progress:
        """Raises NotNow before it has begun."""
        with self._lock:
            plan, points = self._begun(), self._points
            try:
                return Progress(plan, points, self._fit(), "")
            except BadInput as error:
                return Progress(plan, points, None, str(error))

    @property
    def begun(self) -> bool:
        return self._plan is not None

    def take(self, known: Known) -> Progress:
        """Take the averaged position as the return of this tilt.

        Raises NotNow while it is flagged or moves, BadInput for a tilt that cannot be.
        """
        with self._lock:
            plan = self._begun()
            if len(self._points) == MOST_POINTS:
                raise NotNow(f"{MOST_POINTS} points are enough: finish")
            tilt = _tilts(plan, [known], [_name(self._taken + 1)]).tilt_arcsec[0]
            self._refuse_other_camera()
            seen = self._steadiness.now("take the point")
            if any(point.seen.t_s == seen.t_s for point in self._points):
                raise NotNow("this picture has been taken already: wait for the next one")
            self._taken += 1
            point = Point(self._taken, known, float(tilt[0]), float(tilt[1]), seen)
            self._points = (*self._points, point)
        return self.progress

    def undo(self, number: int | None = None) -> Progress:
        """Take back the point of this number, without one the last. Raises NotNow if there is
        none.
        """
        with self._lock:
            self._begun()
            gone = [p for p in self._points if number in (None, p.number)]
            if not gone:
                raise NotNow("there is no such point: nothing was taken back")
            self._points = tuple(p for p in self._points if p is not gone[-1])
        return self.progress

    def give_up(self) -> None:
        """Forget everything taken."""
        with self._lock:
            self._plan, self._camera, self._points = None, None, ()

    def finish(self, name: str, *, note: str, conditions: str, created_utc: str) -> Calibration:
        """The calibration, named. The points stay until ``give_up``, so that nothing is lost if it
        cannot be kept. Raises BadInput if the points do not determine one.
        """
        with self._lock:
            plan, points = self._begun(), self._points
            assert self._camera is not None
            source, target, _ = self._camera
            made = self._fit()
        digest = hashlib.sha256(repr((plan, points, created_utc)).encode()).hexdigest()
        return replace(
            made,
            id=f"{plain_id(name)}-{digest[:8]}",
            created_utc=created_utc,
            target=target,
            made_from={
                "name": name,
                "note": note,
                "conditions": conditions,
                "source": source,
                "way": plan.way.value,
                "plan": _plan_document(plan),
                "points": [_point_document(point) for point in points],
            },
        )

    def _begun(self) -> Plan:
        if self._plan is None:
            raise NotNow("no calibration has begun: choose a way first")
        return self._plan

    def _refuse_other_camera(self) -> None:
        assert self._camera is not None
        source, target, camera = self._camera
        now = self._instrument.status()
        size = now.image_width_px, now.image_height_px
        if now.source != source or size != (camera.image_width_px, camera.image_height_px):
            raise NotNow(
                "the camera or its picture size is another than for the points before: set it "
                "back, or give these points up and begin anew"
            )
        if self._instrument.target is not target:
            raise NotNow(f"the points before are of a {target.value}: choose that target again")

    def _fit(self) -> Calibration:
        points = self._points
        if len(points) < 3:
            need = 3 - len(points)
            raise BadInput(f"{need} more {'point' if need == 1 else 'points'} for residuals")
        assert self._plan is not None
        assert self._camera is not None
        tilts = _tilts(self._plan, [p.known for p in points], [p.name for p in points])
        return calibrate_known_tilts(
            tilts.seen(
                range(len(points)),
                np.array([(p.seen.x_px, p.seen.y_px) for p in points]),
                np.array([p.seen.cov_px2 for p in points]),
            ),
            self._camera[2],
        )


def expected_of_plan(
    plan: Plan, *, lowest: float, highest: float, n: int
) -> tuple[ExpectedScale, float]:
    """What ``n`` points evenly from ``lowest`` to ``highest``, in arcsec or mm, will be worth, and
    over how many arcsec they reach.

    Raises BadInput for fewer than three points, for ends that are one, and for a lever too short.
    """
    if n < 3:
        raise BadInput(f"{n} points leave nothing to check the scale with: plan three at least")
    if not highest > lowest:
        raise BadInput("the points must reach from a smaller to a larger value: give both ends")
    values = np.linspace(lowest, highest, n).tolist()
    lever = plan.way is Way.LEVER
    known = [Known(height_mm=v, axis="y") if lever else Known(y_arcsec=v) for v in values]
    tilts = _tilts(plan, known, [_name(i + 1) for i in range(n)])
    y_arcsec = tilts.tilt_arcsec[:, 1]
    return expected_scale(tilts, Camera(*ANY_SIZE_PX)), float(y_arcsec[-1] - y_arcsec[0])


def _name(number: int) -> str:
    return f"point {number}"


def _tilts(plan: Plan, known: list[Known], names: list[str]) -> TiltSet:
    """The tilts as they are known, without positions; see ``readout.angle.lever``."""
    for one in known:
        _refuse_empty(plan, one)
    shared: tuple[SharedInput, ...] = ()
    if plan.way is Way.LEVER:
        made = lever_tilts(
            [
                LeverRow(name, plan.lever_mm, k.height_mm, plan.height_sd_mm, "xy".index(k.axis))
                for name, k in zip(names, known, strict=True)
            ],
            lever_is=LeverIs.HORIZONTAL if plan.horizontal else LeverIs.ON_TWO_SUPPORTS,
            lever_sd_mm=plan.lever_sd_mm,
        )
        tilt, sd, shared = made.tilt_arcsec, made.sd_arcsec, made.shared
    else:
        tilt = np.array([(k.x_arcsec, k.y_arcsec) for k in known])
        sd = np.full(len(known), plan.sd_arcsec)
        if plan.scale_rel_sd > 0:
            change: F64 = plan.scale_rel_sd * np.where(np.isfinite(tilt), tilt, 0.0)
            shared = (SharedInput("scale of the stage", change),)
    n = len(known)
    return TiltSet(
        names=tuple(names),
        position_px=np.full((n, 2), np.nan),
        position_cov_px2=np.full((n, 3), np.nan),
        tilt_arcsec=tilt,
        sd_arcsec=sd,
        shared=shared,
    )


def _refuse_empty(plan: Plan, known: Known) -> None:
    if plan.way is Way.ANGLES:
        if math.isnan(known.x_arcsec) and math.isnan(known.y_arcsec):
            raise BadInput("no tilt is given: fill in X or Y, as the generator or stage shows it")
        return
    if math.isnan(known.height_mm):
        raise BadInput("no height is given: fill in what lies under the lever, 0 for nothing")
    if known.axis not in ("x", "y"):
        raise BadInput("say which way the lever tilts the mirror: x or y")


def plain_id(name: str) -> str:
    """``name`` as the beginning of an id: letters, digits and hyphens that any system can keep."""
    kept = "".join(c if c.isascii() and c.isalnum() else "-" for c in name.lower())
    return "-".join(part for part in kept.split("-") if part)[:40] or "calibration"


def _plan_document(plan: Plan) -> dict[str, Any]:
    given = {
        "sd_arcsec": plan.sd_arcsec,
        "scale_rel_sd": plan.scale_rel_sd,
        "lever_mm": plan.lever_mm,
        "lever_sd_mm": plan.lever_sd_mm,
        "height_sd_mm": plan.height_sd_mm,
    }
    return {"horizontal": plan.horizontal} | {
        key: None if math.isnan(value) else value for key, value in given.items()
    }


def _point_document(point: Point) -> dict[str, Any]:
    known = {
        "x_arcsec": point.known.x_arcsec,
        "y_arcsec": point.known.y_arcsec,
        "height_mm": point.known.height_mm,
    }
    return {
        "name": point.name,
        **{key: None if math.isnan(value) else value for key, value in known.items()},
        "axis": point.known.axis or None,
        "x_px": point.seen.x_px,
        "y_px": point.seen.y_px,
        "n": point.seen.n,
    }
