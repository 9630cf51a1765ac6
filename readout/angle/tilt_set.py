"""What is known of the frames a calibration is made from, whichever way the tilts came about."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from readout.angle.nominal import Mounting
from readout.model import F64

LEAST_SD_ARCSEC = 1e-4
"""a tilt given as exact is weighted as if known to this"""


@dataclass(frozen=True, slots=True)
class SharedInput:
    """Something that acts on several rows at once: the scale of a stage, the length of a lever.

    ``tilt_arcsec`` (n, 2): by how much it changes each known tilt if it is larger than stated by
    one standard uncertainty. Its error is the same in all rows, so no number of them reduces it.
    """

    name: str
    tilt_arcsec: F64


@dataclass(frozen=True, slots=True)
class TiltSet:
    """What is known of n frames.

    ``names``: of the frames. ``position_px`` (n, 2) and ``position_cov_px2`` (n, 3: xx, xy, yy)
    as sighted; ``tilt_arcsec`` (n, 2), NaN where empty; ``sd_arcsec`` (n,): standard uncertainty
    of one tilt, independent from row to row. ``across_sd_arcsec`` (n,): the same, only at right
    angles to the known tilt: a wedge is turned to a mark less well than its deviation is known.
    ``shared``: what acts on several rows at once. ``zero_of`` (n,): rows with the same number
    share one unknown zero; without it all do.
    """

    names: tuple[str, ...]
    position_px: F64
    position_cov_px2: F64
    tilt_arcsec: F64
    sd_arcsec: F64
    across_sd_arcsec: F64 | None = None
    shared: tuple[SharedInput, ...] = ()
    zero_of: NDArray[np.int64] | None = None

    @property
    def zeros(self) -> NDArray[np.int64]:
        """Number of each row's zero, counted from 0 without gaps, (n,)."""
        if self.zero_of is None:
            return np.zeros(len(self.names), dtype=np.int64)
        return np.unique(self.zero_of, return_inverse=True)[1].astype(np.int64)

    @property
    def known_arcsec(self) -> F64:
        """The tilts with 0 where nothing is known, (n, 2)."""
        return np.where(np.isfinite(self.tilt_arcsec), self.tilt_arcsec, 0.0)

    @property
    def tilt_cov_arcsec2(self) -> F64:
        """Covariance of each row's known tilt, without what is shared, (n, 2, 2)."""
        cov = np.maximum(self.sd_arcsec, LEAST_SD_ARCSEC)[:, None, None] ** 2 * np.eye(2)
        if self.across_sd_arcsec is None:
            return np.asarray(cov)
        x, y = self.known_arcsec.T
        across = np.stack([-y, x], axis=1)
        length = np.linalg.norm(across, axis=1)[:, None]
        across = np.divide(across, length, out=np.zeros_like(across), where=length > 0)
        across *= self.across_sd_arcsec[:, None]
        return np.asarray(cov + across[:, :, None] * across[:, None, :])

    def seen(self, rows: Sequence[int], position_px: F64, position_cov_px2: F64) -> TiltSet:
        """These rows alone, with the positions (m, 2) sighted in their frames."""
        chosen = np.asarray(rows, dtype=np.int64)
        across = self.across_sd_arcsec
        return TiltSet(
            names=tuple(self.names[row] for row in rows),
            position_px=position_px,
            position_cov_px2=position_cov_px2,
            tilt_arcsec=self.tilt_arcsec[chosen],
            sd_arcsec=self.sd_arcsec[chosen],
            across_sd_arcsec=None if across is None else across[chosen],
            shared=tuple(SharedInput(s.name, s.tilt_arcsec[chosen]) for s in self.shared),
            zero_of=None if self.zero_of is None else self.zero_of[chosen],
        )


@dataclass(frozen=True, slots=True)
class Camera:
    """What is known of the camera; the mounting counts only where one axis alone was moved."""

    image_width_px: int
    image_height_px: int
    pitch_um: float | None = None
    mounting: Mounting = field(default=Mounting.STRAIGHT)

    @property
    def centre_px(self) -> tuple[float, float]:
        return (self.image_width_px - 1) / 2, (self.image_height_px - 1) / 2
