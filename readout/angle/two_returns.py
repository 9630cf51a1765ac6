"""Which of two returns is the front face's, from turns of a window in its own plane.

Both faces return nearly the same light, so a picture alone does not tell them apart. But from turn
to turn the rear return runs round the front one with the thick edge; the wrong choice in one frame
shows as a jump to the other side. Only all at once can they be exchanged, which is half a turn of
both axes: that the nudge test has to tell.
"""

from __future__ import annotations

from itertools import combinations

import numpy as np
from numpy.typing import NDArray

from readout.errors import BadInput
from readout.model import F64

CLEARLY = 4.0
"""the other way to pair the returns must leave so many times the misfit"""


def front_first(main_px: F64, other_px: F64, turn_deg: F64) -> NDArray[np.bool_]:
    """True for each frame (n,) whose main return is the front face's, (n, 2) positions given.

    In most frames the brighter one is, for the rear one has passed the front face twice.

    Raises BadInput if the turns do not tell.
    """
    step = other_px - main_px
    turn = np.radians(turn_deg)
    towards = np.stack([np.cos(turn), np.sin(turn)], axis=1)
    pairs = list(combinations(range(len(step)), 2))
    across = [abs(float(np.linalg.det(towards[[i, j]]))) for i, j in pairs]
    if not pairs or max(across) < 0.1:
        signs = np.sign(step @ step[0]) * np.sign(towards @ towards[0])
        return _majority(signs)
    first, second = pairs[int(np.argmax(across))]
    ways = []
    for sign in (1.0, -1.0):
        chosen = np.stack([step[first], sign * step[second]])
        turning = np.linalg.solve(towards[[first, second]], chosen)
        for _ in range(3):
            expected = towards @ turning
            signs = np.where(np.sum(expected * step, axis=1) >= 0, 1.0, -1.0)
            turning = np.linalg.lstsq(towards, signs[:, None] * step, rcond=None)[0]
        misfit = float(np.sum((signs[:, None] * step - towards @ turning) ** 2))
        ways.append((misfit, signs))
    (least, best), (next_least, _) = sorted(ways, key=lambda way: way[0])
    noise = 1e-9 * float(np.sum(step**2))
    if next_least < CLEARLY**2 * (least + noise):
        raise BadInput(
            "these turns of the window do not tell its front return from its rear one: turn it to "
            "directions in between, best eight evenly round"
        )
    return _majority(best)


def _majority(signs: F64) -> NDArray[np.bool_]:
    """The sign that most frames have is the one where the main return is the front face's."""
    return np.asarray(signs == (1.0 if signs.sum() >= 0 else -1.0))
