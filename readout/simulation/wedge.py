"""A wedge of glass in the beam, traced ray by ray with the law of refraction in vector form.

Axes and signs as in ``angle/optics``; the turn of the thick edge is seen from behind the
instrument, 0 to the right, 90 up. The wedge's front face looks at the instrument, square to the
beam unless it leans; its rear face is farther away where the glass is thicker.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from readout.model import F64
from readout.units import ARCSEC_PER_RAD


@dataclass(frozen=True, slots=True)
class GlassWedge:
    """``angle_arcsec`` between the faces, ``index`` against air.

    ``lean_arcsec``: tilt (x, y) of the front face as a mirror's, the same at every turn.
    """

    angle_arcsec: float
    index: float
    lean_arcsec: tuple[float, float] = (0.0, 0.0)

    def through(self, turn_deg: float, mirror_arcsec: tuple[float, float]) -> tuple[float, float]:
        """Slopes of the beam that passed the wedge, met a mirror and passed the wedge again."""
        front, rear = self._faces(turn_deg)
        ray = np.array([0.0, 0.0, 1.0])
        ray = _refracted(_refracted(ray, front, 1 / self.index), rear, self.index)
        ray = _reflected(ray, _normal(*mirror_arcsec))
        ray = _refracted(_refracted(ray, -rear, 1 / self.index), -front, self.index)
        return _slopes(ray)

    def returns(self, turn_deg: float) -> tuple[tuple[float, float], tuple[float, float]]:
        """Slopes of the returns from the front and from the rear face."""
        front, rear = self._faces(turn_deg)
        ray = np.array([0.0, 0.0, 1.0])
        inside = _reflected(_refracted(ray, front, 1 / self.index), rear)
        return _slopes(_reflected(ray, front)), _slopes(_refracted(inside, -front, self.index))

    def _faces(self, turn_deg: float) -> tuple[F64, F64]:
        """Normals away from the instrument. The rear face recedes towards the thick edge."""
        x, y = self.lean_arcsec
        turn = math.radians(turn_deg)
        front = _normal(x, y)
        sideways = np.array([math.cos(turn), math.sin(turn), 0.0])
        sideways -= (sideways @ front) * front
        sideways /= np.linalg.norm(sideways)
        wedge = self.angle_arcsec / ARCSEC_PER_RAD
        return front, math.cos(wedge) * front - math.sin(wedge) * sideways


def _normal(x_arcsec: float, y_arcsec: float) -> F64:
    x, y = x_arcsec / ARCSEC_PER_RAD, y_arcsec / ARCSEC_PER_RAD
    return np.array([math.sin(x) * math.cos(y), math.sin(y), math.cos(x) * math.cos(y)])


def _reflected(ray: F64, normal: F64) -> F64:
    return np.asarray(ray - 2 * (ray @ normal) * normal)


def _refracted(ray: F64, normal: F64, ratio: float) -> F64:
    """``ratio``: index before over index behind; ``normal`` along the way of the ray."""
    along = float(ray @ normal)
    across = ratio * (ray - along * normal)
    return np.asarray(across + math.sqrt(1 - float(across @ across)) * normal)


def _slopes(ray: F64) -> tuple[float, float]:
    return float(-ray[0] / ray[2]), float(-ray[1] / ray[2])
