"""Least squares for the marks of one or two scales.

Known are the marks' places and that from one to the next the slope of the beam along the scale
changes by one division. Unknown are the matrix A, where each scale begins and, if the marks demand
it, the distortion k1. Besides the marks count the directions: along a mark the slope along the
scale does not change, nor does the other slope along the scale's own line. With w(p) the slopes at
a place, n the number of a mark, h the division, t and b the directions of mark and line:

    w_i(p) = s h n + z_i,      dw_i/dp t = 0,      dw_j/dp b = 0   (i along the scale, j across).

Weighted by the marks' covariance; linear in A, repeated for k1. One scale alone gives a
square-pixel camera, A = k R(turn) M with the mounting M as given; two give all of A.
"""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from readout.angle.nominal import mounting_matrix
from readout.angle.tilt_set import Camera
from readout.least_squares import LinearFit, linear_least_squares
from readout.model import F64
from readout.sighting.graduation import Scale
from readout.units import ARCSEC_PER_RAD

MOST_STEPS = 30
SMALLEST_STEP = 1e-9
"""in standard uncertainties of the parameters"""


@dataclass(frozen=True, slots=True)
class GraduationFit:
    """``matrix`` (2, 2) in 1/px, ``k1``; ``zeros``: slope of mark 0 of each scale.

    ``linear``: the last step, its residuals whitened and its cofactor the covariance of the
    parameters; ``design``: whitened. ``to_seven`` (7, parameters): to a calibration's.
    """

    matrix: F64
    k1: float
    zeros: F64
    linear: LinearFit
    design: F64
    to_seven: F64

    @property
    def chi_square(self) -> float:
        return float(self.linear.residuals @ self.linear.residuals)

    @property
    def freedom(self) -> int:
        """Values less unknowns, at least 1."""
        return max(1, self.design.shape[0] - self.design.shape[1])


@dataclass(frozen=True, slots=True)
class GraduationProblem:
    """The scales of one frame (one, or two at right angles), the step of slope from mark to mark,
    and the camera.
    """

    scales: tuple[Scale, ...]
    slope: float
    camera: Camera

    @property
    def method(self) -> str:
        if len(self.scales) == 2:
            return "graduated scales, both axes"
        axis = "y" if self.scales[0].upright else "x"
        return f"graduated scale in {axis} only, square pixels"

    def solved(self, *, with_k1: bool = False) -> GraduationFit:
        """The least-squares solution."""
        theta = self._start()
        m = len(theta)
        theta = np.concatenate([theta, np.zeros(len(self.scales) + with_k1)])
        for scale, at in zip(self.scales, range(m, m + len(self.scales)), strict=True):
            flat, _ = self._matrix(theta[:m])
            w, _ = _slopes(flat.reshape(2, 2), 0.0, self._off(scale))
            axis = int(scale.upright)
            theta[at] = float(np.mean(w[:, axis] - self._known(scale)))
        for _ in range(MOST_STEPS):
            residual, design = self._linearised(theta, m, with_k1=with_k1)
            step = linear_least_squares(design, -residual)
            theta = theta + step.parameters
            if np.max(np.abs(step.parameters) / np.sqrt(np.diag(step.cofactor))) < SMALLEST_STEP:
                break
        flat, by_parameter = self._matrix(theta[:m])
        to_seven = np.zeros((7, len(theta)))
        to_seven[:4, :m] = by_parameter
        if with_k1:
            to_seven[6, -1] = 1.0
        return GraduationFit(
            flat.reshape(2, 2),
            float(theta[-1]) if with_k1 else 0.0,
            theta[m : m + len(self.scales)],
            step,
            design,
            to_seven,
        )

    def curved(self, fit: GraduationFit) -> Iterator[GraduationFit]:
        """The fit with one unknown more for each scale: its marks close up evenly to one side."""
        first = 0
        for scale in self.scales:
            n = len(scale.numbers)
            number = scale.numbers - scale.numbers.mean()
            column = np.zeros(len(fit.design))
            column[first : first + n] = np.linalg.solve(_root(scale), number**2)
            design = np.column_stack([fit.design, column])
            linear = linear_least_squares(design, fit.linear.residuals)
            yield GraduationFit(fit.matrix, fit.k1, fit.zeros, linear, design, fit.to_seven)
            first += n + 1 + math.isfinite(scale.turn_sd_rad)

    def residual_rows(self, fit: GraduationFit) -> list[tuple[dict[str, object], float]]:
        """What is left of each mark, as a calibration keeps it, and in arc-seconds of tilt."""
        rows: list[tuple[dict[str, object], float]] = []
        for scale, zero in zip(self.scales, fit.zeros.tolist(), strict=True):
            axis = int(scale.upright)
            w, _ = _slopes(fit.matrix, fit.k1, self._off(scale))
            left = -(w[:, axis] - self._known(scale) - zero) / 2 * ARCSEC_PER_RAD
            name = "upright" if axis else "level"
            for number, place, off in zip(
                scale.numbers.tolist(), scale.place_px.tolist(), left.tolist(), strict=True
            ):
                row: dict[str, object] = {
                    "file": f"{name} mark {number}",
                    "x_px": place[0],
                    "y_px": place[1],
                    "x_residual_arcsec": None if axis else off,
                    "y_residual_arcsec": off if axis else None,
                }
                rows.append((row, off))
        return rows

    def _off(self, scale: Scale) -> F64:
        return scale.place_px - self.camera.centre_px

    def _known(self, scale: Scale) -> F64:
        """Slopes of the marks from mark 0: the way they grow is the mounting's."""
        axis = int(scale.upright)
        sign = math.copysign(1.0, mounting_matrix(self.camera.mounting)[axis, axis])
        return np.asarray(sign * self.slope * scale.numbers)

    def _start(self) -> F64:
        first = self.scales[0]
        turn = first.mark_turn_rad - (math.pi / 2 if first.upright else 0.0)
        square = np.array([self.slope / first.step_px, turn])
        return self._square(square)[0] if len(self.scales) == 2 else square

    def _matrix(self, p: F64) -> tuple[F64, F64]:
        """Matrix (4,) of the parameters and its derivatives (4, m)."""
        return (p, np.eye(4)) if len(p) == 4 else self._square(p)

    def _square(self, p: F64) -> tuple[F64, F64]:
        """Square pixels: k M R(turn) and its derivatives by k and turn."""
        turned = mounting_matrix(self.camera.mounting, math.degrees(p[1])).ravel()
        quarter = mounting_matrix(self.camera.mounting, math.degrees(p[1]) + 90).ravel()
        return p[0] * turned, np.stack([turned, p[0] * quarter], axis=1)

    def _linearised(self, theta: F64, m: int, *, with_k1: bool) -> tuple[F64, F64]:
        """Whitened residuals and their derivatives with the parameters."""
        flat, by_parameter = self._matrix(theta[:m])
        matrix, k1 = flat.reshape(2, 2), float(theta[-1]) if with_k1 else 0.0
        by_parameter = by_parameter.reshape(2, 2, m)
        residuals, designs = [], []
        for at, scale in enumerate(self.scales, start=m):
            axis, gain = int(scale.upright), self.slope / scale.step_px
            d = self._off(scale)
            w, stretch = _slopes(matrix, k1, d)
            q = d @ matrix.T
            left = w[:, axis] - self._known(scale) - theta[at]
            design = np.zeros((len(d), len(theta)))
            design[:, :m] = np.einsum("nj,jkm,nk->nm", stretch[:, axis], by_parameter, d)
            design[:, at] = -1.0
            if with_k1:
                design[:, -1] = q[:, axis] * np.sum(q**2, axis=1)
            root = _root(scale) * gain
            residuals.append(np.linalg.solve(root, left))
            designs.append(np.linalg.solve(root, design))
            middle = d.mean(axis=0)
            for turn, sd, of in (
                (scale.mark_turn_rad + math.pi / 2, scale.mark_turn_sd_rad, axis),
                (scale.turn_rad, scale.turn_sd_rad, 1 - axis),
            ):
                if math.isfinite(sd):
                    along = np.array([math.cos(turn), math.sin(turn)])
                    left_of, row = _unchanged(matrix, k1, middle, along, of, by_parameter)
                    full = np.zeros(len(theta))
                    full[:m] = row[:m]
                    if with_k1:
                        full[-1] = row[m]
                    residuals.append(np.array([left_of / (gain * sd)]))
                    designs.append(full[None, :] / (gain * sd))
        return np.concatenate(residuals), np.concatenate(designs)


def _root(scale: Scale) -> F64:
    return np.asarray(np.linalg.cholesky(scale.cov_px2))


def _slopes(matrix: F64, k1: float, d: F64) -> tuple[F64, F64]:
    """Slopes (n, 2) at places ``d`` from p0, and their derivatives (n, 2, 2) by A d."""
    q = d @ matrix.T
    r2 = np.sum(q**2, axis=1)
    stretch = (1 + k1 * r2)[:, None, None] * np.eye(2)
    stretch = stretch + 2 * k1 * q[:, :, None] * q[:, None, :]
    return q * (1 + k1 * r2)[:, None], stretch


def _unchanged(
    matrix: F64, k1: float, d: F64, along: F64, axis: int, by_parameter: F64
) -> tuple[float, F64]:
    """Change of one slope a pixel along a direction at a place, and its derivatives (m + 1,).

    The stretch by distortion is taken as it stands: it moves by a small share of a small share.
    """
    _, stretch = _slopes(matrix, k1, d[None, :])
    q = matrix @ d
    by_k1 = (q @ q) * np.eye(2) + 2 * np.outer(q, q)
    by_matrix = np.einsum("j,jkm,k->m", stretch[0, axis], by_parameter, along)
    by_bend = float(by_k1[axis] @ matrix @ along)
    return float(stretch[0, axis] @ matrix @ along), np.append(by_matrix, by_bend)
