"""Peaks at equal steps: which of many belong to one scale, and the number of each."""

from __future__ import annotations

from bisect import bisect_left
from collections.abc import Sequence
from dataclasses import dataclass

TOLERANCE = 0.2
"""of a step, that a peak may lie off its place"""
FOLLOWS = 0.3
"""share by which the step follows what was seen last: a lens may stretch it along the scale"""
MOST_MISSING = 12
FARTHEST_SEED = 3
MOST_SEEDS = 24
LEAST_MEMBERS = 5
STRANGER = 0.5


@dataclass(frozen=True, slots=True)
class Chain:
    """Peaks of one scale.

    ``members``: indices of the peaks; ``numbers``: steps from the first; ``score``: the members,
    less those missing between them where they would be seen, less half of the strangers.
    """

    members: list[int]
    numbers: list[int]
    score: float


def best_chain(
    places: Sequence[float], *, least_step: float, seen: Sequence[bool] | None = None
) -> Chain | None:
    """The best evenly spaced run among rising ``places``; None where none scores five.

    ``seen``: False at whole places where a peak would not be seen; all are, without it.

    A step of half the right one has as many places missing as seen, one of twice as much leaves
    out every second: both score less.
    """
    n = len(places)
    if n < LEAST_MEMBERS:
        return None
    mirrored = [-place for place in reversed(places)]
    best: Chain | None = None
    every = max(1, n // MOST_SEEDS)
    for first in range(0, n - 1, every):
        for second in range(first + 1, min(n, first + 1 + FARTHEST_SEED)):
            step = places[second] - places[first]
            if step < least_step:
                continue
            up, not_up = _followed(places, second, step, seen)
            down, not_down = _followed(mirrored, n - 1 - first, step, seen)
            chain = [(n - 1 - k, -m) for k, m in reversed(down)]
            chain += [(first, 0), (second, 1), *((k, m + 1) for k, m in up)]
            score: float = len(chain) - not_up - not_down
            score -= STRANGER * (chain[-1][0] - chain[0][0] + 1 - len(chain))
            if min(len(chain), score) >= LEAST_MEMBERS and (best is None or score > best.score):
                start = chain[0][1]
                best = Chain([k for k, _ in chain], [m - start for _, m in chain], score)
    return best


def _followed(
    places: Sequence[float], start: int, step: float, seen: Sequence[bool] | None
) -> tuple[list[tuple[int, int]], int]:
    """Peaks after ``start`` in rising ``places``, each with its number from it.

    Also how many are missing between them where they would be seen.
    """
    found: list[tuple[int, int]] = []
    at, number, last, k = places[start], 0, 0, start + 1
    missing = missing_since = 0
    while number - last < MOST_MISSING:
        number += 1
        expected = at + (number - last) * step
        k = bisect_left(places, expected - TOLERANCE * step, k)
        if k == len(places):
            break
        if places[k] > expected + TOLERANCE * step:
            missing_since += seen is None or seen[round(abs(expected))]
            continue
        if k + 1 < len(places) and abs(places[k + 1] - expected) < abs(places[k] - expected):
            k += 1
        step += FOLLOWS * ((places[k] - at) / (number - last) - step)
        at, last = places[k], number
        missing, missing_since = missing + missing_since, 0
        found.append((k, number))
        k += 1
    return found, missing
