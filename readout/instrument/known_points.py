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

from readout.angle import Calibration, Camera, Mounting, TiltSet, calibrate_known_tilts
from readout.errors import BadInput, NotNow
from readout.instrument.instrument import Instrument
from readout.instrument.steady import Steadiness, Steady
from readout.model import Target
from readout.units import ARCSEC_PER_RAD

LEAST_SD_ARCSEC = 1e-4
"""a tilt given as exact is weighted as if known to this"""
MOST_POINTS = 200


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

    @property
    def common_rel_sd(self) -> float:
        """Relative standard uncertainty that all tilts share."""
        if self.way is Way.LEVER:
            return self.lever_sd_mm / self.lever_mm
        return self.scale_rel_sd


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
    """A known tilt and where the return lay; ``sd_arcsec`` of the tilt, not of the position."""

    number: int
    known: Known
    x_arcsec: float
    y_arcsec: float
    sd_arcsec: float
    seen: Steady

    @property
    def name(self) -> str:
        return f"point {self.number}"


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
            x_arcsec, y_arcsec, sd_arcsec = _tilt(plan, known)
            self._refuse_other_camera()
            seen = self._steadiness.now("take the point")
            if any(point.seen.t_s == seen.t_s for point in self._points):
                raise NotNow("this picture has been taken already: wait for the next one")
            self._taken += 1
            point = Point(self._taken, known, x_arcsec, y_arcsec, sd_arcsec, seen)
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
                "common_rel_sd": plan.common_rel_sd,
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
        return calibrate_known_tilts(
            TiltSet(
                names=tuple(point.name for point in points),
                position_px=np.array([(p.seen.x_px, p.seen.y_px) for p in points]),
                position_cov_px2=np.array([p.seen.cov_px2 for p in points]),
                tilt_arcsec=np.array([(p.x_arcsec, p.y_arcsec) for p in points]),
                sd_arcsec=np.array([max(p.sd_arcsec, LEAST_SD_ARCSEC) for p in points]),
            ),
            self._camera[2],
            scale_rel_sd=self._plan.common_rel_sd,
        )


def _tilt(plan: Plan, known: Known) -> tuple[float, float, float]:
    """Tilt of both axes, NaN where not known, and its standard uncertainty, arcsec."""
    if plan.way is Way.ANGLES:
        if math.isnan(known.x_arcsec) and math.isnan(known.y_arcsec):
            raise BadInput("no tilt is given: fill in X or Y, as the generator or stage shows it")
        return known.x_arcsec, known.y_arcsec, plan.sd_arcsec
    if math.isnan(known.height_mm):
        raise BadInput("no height is given: fill in what lies under the lever, 0 for nothing")
    if known.axis not in ("x", "y"):
        raise BadInput("say which way the lever tilts the mirror: x or y")
    tilt, sd = lever_tilt_arcsec(plan, known.height_mm)
    return (tilt, math.nan, sd) if known.axis == "x" else (math.nan, tilt, sd)


def lever_tilt_arcsec(plan: Plan, height_mm: float) -> tuple[float, float]:
    """Tilt of the lever raised by ``height_mm``, and what the height's uncertainty makes of it.

    asin(height / lever) for a bar on two supports, atan for a length along the ground.
    """
    ratio = height_mm / plan.lever_mm
    if plan.horizontal:
        tilt, by_ratio = math.atan(ratio), 1 / (1 + ratio**2)
    elif abs(ratio) >= 1:
        raise BadInput(
            f"a lever of {plan.lever_mm:g} mm cannot be raised by {height_mm:g} mm: "
            "check which is which"
        )
    else:
        tilt, by_ratio = math.asin(ratio), 1 / math.sqrt(1 - ratio**2)
    sd = plan.height_sd_mm / plan.lever_mm * by_ratio
    return tilt * ARCSEC_PER_RAD, sd * ARCSEC_PER_RAD


def plain_id(name: str) -> str:
    """``name`` as the beginning of an id: letters, digits and hyphens that any system can keep."""
    kept = "".join(c if c.isascii() and c.isalnum() else "-" for c in name.lower())
    return "-".join(part for part in kept.split("-") if part)[:40] or "calibration"


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
        "sd_arcsec": point.sd_arcsec,
        "x_px": point.seen.x_px,
        "y_px": point.seen.y_px,
        "n": point.seen.n,
    }
