"""Gross errors without a word, among mixed frames."""

from __future__ import annotations

from collections import Counter
from concurrent.futures import Executor

from scipy.stats import beta

from readout.model import Quality
from readout.sighting import locate
from tests.bench.mixed import PREPARED, WITH_TARGET, mixed_picture
from tests.bench.placing import CHUNK, GROSS_PX

Tally = Counter[tuple[str, str]]
"""how many frames of a sort came out as: good, flagged, none, gross"""


def outcomes(seed: int, first: int, last: int) -> tuple[Tally, list[str]]:
    """What became of frames first to last - 1, and which were grossly wrong unsaid."""
    tally: Tally = Counter()
    wrong = []
    for k in range(first, last):
        sort, picture = mixed_picture(seed, k)
        found = locate(
            picture.pixels, full_scale=picture.full_scale, preparation=picture.preparation
        )
        if not found.found:
            outcome = "none"
        elif sort.endswith(PREPARED):  # nothing is left to be seen: a flag excuses no position
            outcome = "gross"
            wrong.append(f"{sort}: mixed_picture({seed}, {k})")
        elif found.quality is not Quality.OK:
            outcome = "flagged"
        elif sort == WITH_TARGET and (
            abs(found.x_px - picture.x_px) <= GROSS_PX
            and abs(found.y_px - picture.y_px) <= GROSS_PX
        ):
            outcome = "good"
        else:
            outcome = "gross"
            wrong.append(f"{sort}: mixed_picture({seed}, {k})")
        tally[sort, outcome] += 1
    return tally, wrong


def run_mixed(pool: Executor, seeds: list[int], frames: int) -> tuple[Tally, list[str]]:
    """``frames`` in all, spread over the seeds."""
    each = -(-frames // len(seeds))
    jobs = [
        pool.submit(outcomes, seed, first, min(first + CHUNK, each))
        for seed in seeds
        for first in range(0, each, CHUNK)
    ]
    tally: Tally = Counter()
    wrong: list[str] = []
    for job in jobs:
        more, which = job.result()
        tally += more
        wrong += which
    return tally, wrong


def upper_limit(events: int, n: int, confidence: float = 0.95) -> float:
    """One-sided upper limit of a share (C. J. Clopper, E. S. Pearson, Biometrika 26 (1934) 404)."""
    return 1.0 if events >= n else float(beta.ppf(confidence, events + 1, n - events))
