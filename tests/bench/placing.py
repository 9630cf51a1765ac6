"""Frames of a kind through the sighting, in parallel: errors, claims and words."""

from __future__ import annotations

from concurrent.futures import Executor
from dataclasses import dataclass

import numpy as np

from readout.model import F64, Quality, Target
from readout.sighting import locate
from tests.bench.kinds import COARSE_KIND, LIMIT, Kind
from tests.bench.real import REAL

KINDS: dict[str, Kind] = {**LIMIT, COARSE_KIND.name: COARSE_KIND, **REAL}
GROSS_PX = 0.1
CHUNK = 100


@dataclass(frozen=True)
class Placed:
    """What became of n frames: ``error_px`` and ``sd_px`` (n, 2), NaN where nothing was found."""

    error_px: F64
    sd_px: F64
    flagged: np.ndarray

    @property
    def found(self) -> np.ndarray:
        return np.isfinite(self.error_px).all(axis=1)

    @property
    def gross(self) -> np.ndarray:
        """Wrong by more than 0.1 px and not a word about it."""
        with np.errstate(invalid="ignore"):
            return (np.abs(self.error_px) > GROSS_PX).any(axis=1) & ~self.flagged


def pooled(parts: list[Placed]) -> Placed:
    return Placed(
        np.concatenate([part.error_px for part in parts]),
        np.concatenate([part.sd_px for part in parts]),
        np.concatenate([part.flagged for part in parts]),
    )


def place(name: str, seed: int, first: int, last: int, tracked: bool) -> Placed:
    """Frames first to last - 1 of a kind, from nothing or each from the sighting before it."""
    kind, before = KINDS[name], None
    errors, sds, flagged = [], [], []
    for k in range(first, last):
        picture = kind.picture(seed, k)
        found = locate(
            picture.pixels, full_scale=picture.full_scale, target=Target(kind.target), prior=before
        )
        before = found if tracked else None
        errors.append((found.x_px - picture.x_px, found.y_px - picture.y_px))
        sds.append((found.cov_px2[0] ** 0.5, found.cov_px2[2] ** 0.5))
        flagged.append(found.quality is not Quality.OK)
    return Placed(np.array(errors), np.array(sds), np.array(flagged))


def run_kind(
    pool: Executor, name: str, seeds: list[int], frames: int, tracked: bool
) -> list[Placed]:
    """All frames of a kind, one result a seed."""
    jobs = [
        [
            pool.submit(place, name, seed, first, min(first + CHUNK, frames), tracked)
            for first in range(0, frames, CHUNK)
        ]
        for seed in seeds
    ]
    return [pooled([job.result() for job in of_seed]) for of_seed in jobs]
