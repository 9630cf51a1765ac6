"""Reflection at the mirror, exact, both ways.

Axes: looking out of the instrument from behind it, x to the right, y up, z away from the
observer. The beam leaves along d = (0, 0, 1). A mirror whose right edge is nearer by X and whose
top edge is nearer by Y has the normal n = (sin X cos Y, sin Y, cos X cos Y), pointing away from
the instrument. The law of reflection in vector form, r = d - 2 (d.n) n, sends the beam back; it
meets the focal plane at (u, v) = f (r_x, r_y) / (-r_z). Everything here works on the *slopes*
w = (u, v) / f, so that no focal length is needed.

The inverse needs no iteration: r and d differ by a vector along the normal, n ~ d - r.

A bare upright sensor shows the return moving right for X > 0 and up for Y > 0; that turn of
signs is part of the calibration's matrix (``mounting_matrix`` in ``nominal``) and nowhere else.
"""

from __future__ import annotations

import numpy as np

from readout.model import F64
from readout.units import ARCSEC_PER_RAD


def slopes_of_tilt(x_arcsec: F64 | float, y_arcsec: F64 | float) -> tuple[F64, F64]:
    """Slopes (w_x, w_y) of the returning beam for a mirror tilt; arrays of one shape, or scalars.

    For one axis alone w_x = -tan 2X: the image moves by twice the tilt.
    """
    x = np.asarray(x_arcsec, dtype=np.float64) / ARCSEC_PER_RAD
    y = np.asarray(y_arcsec, dtype=np.float64) / ARCSEC_PER_RAD
    n_x, n_y, n_z = np.sin(x) * np.cos(y), np.sin(y), np.cos(x) * np.cos(y)
    r_x, r_y, r_z = -2 * n_z * n_x, -2 * n_z * n_y, 1 - 2 * n_z * n_z
    return r_x / -r_z, r_y / -r_z


def tilt_of_slopes(w_x: F64 | float, w_y: F64 | float) -> tuple[F64, F64]:
    """Tilt (x, y) of the mirror in arc-seconds from the slopes of the returning beam.

    With r = (w_x, w_y, -1)/s and s = |(w_x, w_y, 1)|, the normal d - r is along
    (-w_x, -w_y, s + 1). NaN in, NaN out.
    """
    w_x, w_y = np.asarray(w_x, dtype=np.float64), np.asarray(w_y, dtype=np.float64)
    along = np.sqrt(1 + w_x**2 + w_y**2) + 1
    x = np.arctan2(-w_x, along)
    y = np.arctan2(-w_y, np.hypot(w_x, along))
    return x * ARCSEC_PER_RAD, y * ARCSEC_PER_RAD


def tilt_jacobian(w_x: F64 | float, w_y: F64 | float) -> F64:
    """Derivatives of ``tilt_of_slopes``, arc-seconds per unit slope, shape (..., 2, 2).

    Rows are (x, y) tilt, columns (w_x, w_y). At zero it is -1/2 times the identity in radians.
    """
    w_x, w_y = np.asarray(w_x, dtype=np.float64), np.asarray(w_y, dtype=np.float64)
    s = np.sqrt(1 + w_x**2 + w_y**2)
    along = s + 1
    across2 = w_x**2 + along**2
    across = np.sqrt(across2)
    d_across_x = w_x * (1 + along / s) / across
    d_across_y = along * w_y / s / across
    full2 = across2 + w_y**2
    rows = np.stack(
        [
            np.stack([-(along - w_x**2 / s) / across2, w_x * w_y / s / across2], axis=-1),
            np.stack(
                [w_y * d_across_x / full2, -(across - w_y * d_across_y) / full2],
                axis=-1,
            ),
        ],
        axis=-2,
    )
    return rows * ARCSEC_PER_RAD
