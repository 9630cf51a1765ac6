"""The calibration: which slope of the returning beam belongs to which pixel.

(u, v) / f = A (p - p0) (1 + k1 |A (p - p0)|^2). A, 2x2 in 1/px, carries focal length, pixel
pitch, camera rotation and mirror images at once; p0 is the pixel on the optical axis; k1 the
radial distortion of the objective (third order, as in close-range photogrammetry: D. C. Brown,
Photogrammetric Engineering 37 (1971) 855), 0 unless measured.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from typing import Any, Literal

import numpy as np

from readout.angle.optics import slopes_of_tilt, tilt_jacobian, tilt_of_slopes
from readout.model import F64, Target
from readout.units import ARCSEC_PER_RAD

PARAMETERS = ("a_xx", "a_xy", "a_yx", "a_yy", "p0_x_px", "p0_y_px", "k1")
Row2 = tuple[float, float]


def matrix_rows(matrix: F64) -> tuple[Row2, Row2]:
    """A (2, 2) array as the rows a calibration keeps."""
    (a_xx, a_xy), (a_yx, a_yy) = matrix.tolist()
    return (a_xx, a_xy), (a_yx, a_yy)


@dataclass(frozen=True, slots=True)
class Calibration:
    """A fixed relation of pixels to mirror tilt, with the covariance of its parameters.

    ``matrix``: A, rows (x, y) slope, columns (x, y) pixel, in 1/px. ``p0_px``: pixel of the
    optical axis. ``param_cov``: 7x7 covariance, order of ``PARAMETERS``. ``signs``: "proven" once
    a nudge of the mirror has shown them, else "unproven". ``image_width_px, image_height_px`` and
    ``target``: what it is valid for. ``signs_shown``: the tests that have shown the signs, each
    with how, when and what was seen.
    """

    id: str
    created_utc: str
    method: str
    matrix: tuple[Row2, Row2]
    p0_px: Row2
    image_width_px: int
    image_height_px: int
    k1: float = 0.0
    param_cov: tuple[tuple[float, ...], ...] = tuple((0.0,) * 7 for _ in range(7))
    signs: Literal["proven", "unproven"] = "unproven"
    target: Target = Target.CROSSHAIR
    pitch_um: float | None = None
    residuals: tuple[dict[str, Any], ...] = ()
    residual_rms_arcsec: float | None = None
    n: int = 0
    warnings: tuple[str, ...] = ()
    made_from: dict[str, Any] = field(default_factory=dict)
    signs_shown: tuple[dict[str, Any], ...] = ()

    @property
    def focal_length_px(self) -> float:
        """Focal length in pixels, |det A|^(-1/2)."""
        return float(abs(np.linalg.det(np.array(self.matrix))) ** -0.5)

    @property
    def focal_length_px_sd(self) -> float:
        """Standard uncertainty of ``focal_length_px``: d ln f = -1/2 tr(A^-1 dA)."""
        inverse = np.linalg.inv(np.array(self.matrix))
        gradient = -0.5 * self.focal_length_px * inverse.T.ravel()
        cov = np.array(self.param_cov)[:4, :4]
        return math.sqrt(max(0.0, float(gradient @ cov @ gradient)))  # rounding may make it -0

    @property
    def focal_length_mm(self) -> float | None:
        """Focal length in millimetres, None where the pixel pitch is not known."""
        return None if self.pitch_um is None else self.focal_length_px * self.pitch_um * 1e-3

    @property
    def scale_arcsec_per_px(self) -> Row2:
        """Mirror tilt per pixel near the axis, along the X and the Y tilt, both > 0."""
        inverse = np.linalg.inv(np.array(self.matrix))
        x, y = 0.5 * ARCSEC_PER_RAD / np.linalg.norm(inverse, axis=0)
        return float(x), float(y)

    @property
    def rotation_deg(self) -> float:
        """From picture +x to the direction of growing X tilt, positive clockwise on screen."""
        inverse = np.linalg.inv(np.array(self.matrix))
        x, y = -inverse[:, 0]
        return math.degrees(math.atan2(y, x))

    @property
    def mirrored(self) -> bool:
        """True if the picture is a mirror image of what a bare upright sensor shows."""
        return bool(np.linalg.det(np.array(self.matrix)) > 0)

    def slopes(self, x_px: F64 | float, y_px: F64 | float) -> tuple[F64, F64]:
        """Slopes of the returning beam for points of the picture; any shape, NaN stays NaN."""
        (a_xx, a_xy), (a_yx, a_yy) = self.matrix
        d_x = np.asarray(x_px, dtype=np.float64) - self.p0_px[0]
        d_y = np.asarray(y_px, dtype=np.float64) - self.p0_px[1]
        q_x, q_y = a_xx * d_x + a_xy * d_y, a_yx * d_x + a_yy * d_y
        stretch = 1 + self.k1 * (q_x**2 + q_y**2)
        return q_x * stretch, q_y * stretch

    def tilt(self, x_px: F64 | float, y_px: F64 | float) -> tuple[F64, F64]:
        """Absolute mirror tilt (x, y) in arc-seconds for points of the picture, any shape."""
        return tilt_of_slopes(*self.slopes(x_px, y_px))

    def position(self, x_arcsec: F64 | float, y_arcsec: F64 | float) -> tuple[F64, F64]:
        """Where in the picture the return of a mirror with this tilt lies: inverse of ``tilt``."""
        w = np.stack(np.broadcast_arrays(*slopes_of_tilt(x_arcsec, y_arcsec)))
        size = np.hypot(w[0], w[1])
        radius = size.copy()
        for _ in range(8 if self.k1 else 0):  # Newton on r (1 + k1 r^2) = |w|
            radius -= (radius * (1 + self.k1 * radius**2) - size) / (1 + 3 * self.k1 * radius**2)
        q = w / (1 + self.k1 * radius**2)
        d = np.tensordot(np.linalg.inv(np.array(self.matrix)), q, axes=1)
        return d[0] + self.p0_px[0], d[1] + self.p0_px[1]

    def tilt_per_px(self, x_px: float, y_px: float) -> F64:
        """Derivative of the tilt with the position, arc-seconds per pixel, shape (2, 2)."""
        matrix = np.array(self.matrix)
        q = matrix @ (np.array([x_px, y_px]) - self.p0_px)
        stretch = (1 + self.k1 * (q @ q)) * np.eye(2) + 2 * self.k1 * np.outer(q, q)
        return tilt_jacobian(*self.slopes(x_px, y_px)) @ stretch @ matrix

    def noise_cov(self, x_px: float, y_px: float, cov_px2: tuple[float, float, float]) -> F64:
        """Covariance of the tilt from the covariance (xx, xy, yy) of the position, arcsec^2."""
        xx, xy, yy = cov_px2
        j = self.tilt_per_px(x_px, y_px)
        return j @ np.array([[xx, xy], [xy, yy]]) @ j.T

    def calibration_cov(self, x_px: F64 | float, y_px: F64 | float) -> F64:
        """Covariance of the tilt from the parameters' covariance, arcsec^2, shape (..., 2, 2).

        It is common to all rows. Places of any shape; NaN stays NaN.
        """
        return self._parameters_share(self._tilt_per_parameter(x_px, y_px))

    def difference_cov(
        self, x_px: F64 | float, y_px: F64 | float, from_x_px: float, from_y_px: float
    ) -> F64:
        """Covariance, from the parameters' covariance, of the tilt at a place minus the tilt at
        another, arcsec^2, shape (..., 2, 2).

        The parameters are the same at both places, so their errors are subtracted before they are
        squared (JCGM 100:2008, 5.2): an uncertain scale counts with the difference of the tilts,
        an uncertain axis hardly at all. Places of any shape; NaN stays NaN.
        """
        there = self._tilt_per_parameter(x_px, y_px)
        return self._parameters_share(there - self._tilt_per_parameter(from_x_px, from_y_px))

    def _parameters_share(self, per_parameter: F64) -> F64:
        cov = np.array(self.param_cov)
        return np.asarray(per_parameter @ cov @ np.swapaxes(per_parameter, -1, -2))

    def _tilt_per_parameter(self, x_px: F64 | float, y_px: F64 | float) -> F64:
        """Derivatives of the tilt, in arc-seconds, with the ``PARAMETERS``, shape (..., 2, 7)."""
        matrix = np.array(self.matrix)
        d = np.stack(np.broadcast_arrays(x_px, y_px), axis=-1) - self.p0_px
        q = d @ matrix.T
        r2 = np.sum(q**2, axis=-1)[..., None]
        stretch = (1 + self.k1 * r2[..., None]) * np.eye(2)
        stretch = stretch + 2 * self.k1 * q[..., :, None] * q[..., None, :]
        dq = np.zeros((*d.shape, 7))
        dq[..., 0, 0:2] = d
        dq[..., 1, 2:4] = d
        dq[..., :, 4:6] = -matrix
        dw = stretch @ dq
        dw[..., :, 6] = q * r2
        return np.asarray(tilt_jacobian(*self.slopes(x_px, y_px)) @ dw)
