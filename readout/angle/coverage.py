"""From a standard uncertainty to an interval: degrees of freedom and coverage factor.

JCGM 100:2008, annex G. The formula of Welch and Satterthwaite (B. L. Welch, J. R. Stat. Soc.
Suppl. 3 (1936) 29; F. E. Satterthwaite, Biometrics Bull. 2 (1946) 110) holds for contributions
that are independent of each other, and for no others.
"""

from __future__ import annotations

import math
from collections.abc import Sequence

from scipy.special import ndtri, stdtrit

from readout.errors import BadInput


def effective_freedom(variances: Sequence[float], freedoms: Sequence[float]) -> float:
    """Effective degrees of freedom of the sum of *independent* contributions.

    (sum V)^2 / sum (V^2 / freedom), for variances V of the contributions to the result. Infinite
    where none of the uncertainties is in doubt.
    """
    total = sum(variances)
    doubt = sum(
        (v / total) ** 2 / freedom
        for v, freedom in zip(variances, freedoms, strict=True)
        if v > 0 and math.isfinite(freedom)
    )
    return 1 / doubt if doubt > 0 else math.inf


def freedom_of_doubt(relative_doubt: float) -> float:
    """Degrees of freedom for a standard uncertainty that may be wrong by this share of itself.

    1 / (2 doubt^2): JCGM 100:2008, G.4.2. A quarter in doubt is 8 degrees of freedom.
    """
    if not relative_doubt >= 0:
        raise BadInput(f"a doubt of {relative_doubt:g} cannot be: give a share such as 0.25")
    return 0.5 / relative_doubt**2 if relative_doubt > 0 else math.inf


def coverage_factor(level: float, freedom: float = math.inf) -> float:
    """Half width, in standard uncertainties, of the interval that holds the share ``level``.

    Student's t for ``freedom`` degrees of freedom, which need not be whole (JCGM 100:2008, G.3
    and G.6.4). Raises BadInput unless 0 < level < 1 and freedom > 0.
    """
    if not 0 < level < 1:
        raise BadInput(f"a level of {level:g} cannot be: give a share such as 0.95")
    if not freedom > 0:
        raise BadInput(f"{freedom:g} degrees of freedom cannot be: give more than none")
    upper = 0.5 + level / 2
    return float(ndtri(upper) if math.isinf(freedom) else stdtrit(freedom, upper))
