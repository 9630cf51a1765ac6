"""How an input may be distributed, and the standard uncertainty that belongs to its limits.

Limits -a to +a (JCGM 100:2008, 4.3.7 and 4.3.9; the arcsine as in annex H.1.3.4):

    rectangular  a / sqrt 3   nothing is known but the limits
    triangular   a / sqrt 6   values near the middle are likelier; the difference of two rectangular
    arcsine      a / sqrt 2   a sine that may be caught at any phase: U-shaped
    normal       known by its standard uncertainty; has no limits
"""

from __future__ import annotations

import math
from enum import StrEnum

import numpy as np

from readout.errors import BadInput
from readout.model import F64


class Distribution(StrEnum):
    """The distribution an input is taken to have."""

    NORMAL = "normal"
    RECTANGULAR = "rectangular"
    TRIANGULAR = "triangular"
    ARCSINE = "arcsine"


_HALF_WIDTH_PER_SD = {
    Distribution.RECTANGULAR: math.sqrt(3),
    Distribution.TRIANGULAR: math.sqrt(6),
    Distribution.ARCSINE: math.sqrt(2),
}


def sd_of_limits(half_width: float, distribution: Distribution) -> float:
    """Standard uncertainty for limits of ± ``half_width``, in the same unit.

    Raises BadInput for limits that cannot be, and for the normal distribution, which has none.
    """
    if not (math.isfinite(half_width) and half_width >= 0):
        raise BadInput(f"limits of ±{half_width:g} cannot be: give a number that is not negative")
    if distribution is Distribution.NORMAL:
        raise BadInput(
            "a normal distribution has no limits: give its standard uncertainty, "
            "or limits with rectangular, triangular or arcsine"
        )
    return half_width / _HALF_WIDTH_PER_SD[distribution]


def limits_of_sd(sd: float, distribution: Distribution) -> float | None:
    """Half the width between the limits for a standard uncertainty; None where there are none."""
    per_sd = _HALF_WIDTH_PER_SD.get(distribution)
    return None if per_sd is None else sd * per_sd


def draw_unit(
    distribution: Distribution, freedom: float, trials: int, rng: np.random.Generator
) -> F64:
    """Deviations of an input whose standard uncertainty is one, shape (trials,).

    With few degrees of freedom the uncertainty itself is in doubt (JCGM 101:2008, 6.4.3 and
    6.4.9): a normal one then becomes Student's t, and limits are themselves drawn from
    1 ± 1/sqrt(2 freedom) of their width (the relative doubt of JCGM 100:2008, G.4.2).
    """
    match distribution:
        case Distribution.NORMAL if math.isinf(freedom):
            return rng.standard_normal(trials)
        case Distribution.NORMAL:
            return rng.standard_t(freedom, trials)
        case Distribution.RECTANGULAR:
            within = rng.uniform(-1.0, 1.0, trials)
        case Distribution.TRIANGULAR:
            within = rng.triangular(-1.0, 0.0, 1.0, trials)
        case Distribution.ARCSINE:
            within = np.sin(rng.uniform(0.0, 2 * math.pi, trials))
    drawn = within * _HALF_WIDTH_PER_SD[distribution]
    if math.isinf(freedom):
        return drawn
    doubt = min(1.0, 1 / math.sqrt(2 * freedom))
    return drawn * rng.uniform(1 - doubt, 1 + doubt, trials)
