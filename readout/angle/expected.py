"""What a set of tilts will be worth, said before the first frame is taken.

The planned tilts are sent through a nominal camera and fitted like real ones: the covariance does
not depend on the noise that will come, only on the plan. What is shared by the rows is told apart,
because more rows help against the rest only.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from readout.angle.both_sides import BothSides, fit_both_sides
from readout.angle.nominal import nominal_calibration
from readout.angle.tilt_model import TiltModel, choose_model
from readout.angle.tilt_set import Camera, SharedInput, TiltSet
from readout.model import F64

FOCAL_LENGTH_PX = 1e5
"""300 mm with pixels of 3 µm: where nothing is known, and only for the share of the pictures"""
PLACE_SD_PX = 0.01
"""a crosshair in one ordinary frame, with some air (common practice)"""


@dataclass(frozen=True, slots=True)
class ExpectedScale:
    """Relative standard uncertainties u(f)/f: of all, of what is new in each row, and of each
    shared input by its name, the largest first.
    """

    rel_sd: float
    rows_rel_sd: float
    shared_rel_sd: tuple[tuple[str, float], ...]

    @property
    def largest(self) -> str:
        """What limits it."""
        if self.shared_rel_sd and self.shared_rel_sd[0][1] >= self.rows_rel_sd:
            return self.shared_rel_sd[0][0]
        return "the rows themselves"


def expected_scale(
    planned: TiltSet,
    camera: Camera,
    *,
    focal_length_px: float = FOCAL_LENGTH_PX,
    place_sd_px: float = PLACE_SD_PX,
) -> ExpectedScale:
    """u(f)/f of a calibration from ``planned``, whose positions are not looked at.

    Raises BadInput where the plan does not determine a calibration.
    """
    n = len(planned.names)
    nominal = nominal_calibration(
        focal_length_mm=focal_length_px * 1e-3,
        pitch_um=1.0,
        image_width_px=camera.image_width_px,
        image_height_px=camera.image_height_px,
        mounting=camera.mounting,
    )
    tilt = planned.known_arcsec
    seen = planned.seen(
        range(n),
        np.stack(nominal.position(tilt[:, 0], tilt[:, 1]), axis=1),
        np.tile([place_sd_px**2, 0.0, place_sd_px**2], (n, 1)),
    )
    model = choose_model(seen, camera)
    fit = fit_both_sides(seen, camera, model)
    gradient = _relative_gradient(model, fit)
    rows = math.sqrt(max(0.0, float(gradient @ fit.cofactor @ gradient)))
    used = fit.used
    changes = gradient @ fit.cofactor @ fit.design[used].T @ fit.shared[used]
    shared = _by_size(planned.shared, np.abs(changes))
    return ExpectedScale(math.hypot(rows, *(u for _, u in shared)), rows, shared)


def _by_size(shared: tuple[SharedInput, ...], size: F64) -> tuple[tuple[str, float], ...]:
    pairs = [(item.name, float(u)) for item, u in zip(shared, size, strict=True)]
    return tuple(sorted(pairs, key=lambda pair: -pair[1]))


def _relative_gradient(model: TiltModel, fit: BothSides) -> F64:
    """Derivatives of ln f with the parameters: -1/2 tr(A^-1 dA)."""
    flat, by_parameter = model.matrix(fit.parameters)
    gradient = np.zeros(len(fit.parameters))
    gradient[: model.m] = -0.5 * np.linalg.inv(flat.reshape(2, 2)).T.ravel() @ by_parameter
    return gradient
