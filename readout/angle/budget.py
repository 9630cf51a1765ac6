"""An uncertainty budget: what a result's uncertainty is made of.

The terms and the law of propagation are those of JCGM 100:2008 (GUM), clause 5:

    u_c^2 = sum_i sum_j c_i u_i r_ij c_j u_j

with the standard uncertainty u_i of each input, its sensitivity c_i and the correlations r_ij. An
input that nobody has given has no uncertainty, which is not the same as none: its line stays in
the budget and says "not stated".
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from enum import StrEnum

import numpy as np

from readout.angle.coverage import coverage_factor, effective_freedom
from readout.angle.distributions import Distribution, limits_of_sd, sd_of_limits
from readout.errors import BadInput
from readout.model import F64

LEVEL = 0.95
"""coverage of the expanded uncertainty where nothing else is asked for"""


class Standing(StrEnum):
    """Where the uncertainty of a line comes from."""

    MEASURED = "measured"
    """from the readings or the calibration"""
    STATED = "stated"
    """given by the user"""
    DEFAULT = "default"
    """nobody has given it: a usual value stands in its place"""
    NOT_STATED = "not stated"
    """nobody has given it, and no usual value is known: missing in the sum"""
    NOT_APPLICABLE = "does not apply"
    """cannot act on this result; the note says why"""


@dataclass(frozen=True, slots=True)
class Contribution:
    """One input of the budget.

    ``standard_uncertainty`` and ``value`` in ``unit``; None if not stated or not applicable.
    ``sensitivity``: change of the result, in its own unit, per ``unit`` of the input. ``freedom``:
    degrees of freedom, infinite where the uncertainty is not in doubt. ``common``: the same in all
    readings, so that averaging does not reduce it; else independent from one to the next.
    """

    name: str
    standard_uncertainty: float | None
    unit: str
    sensitivity: float = 1.0
    distribution: Distribution = Distribution.NORMAL
    freedom: float = math.inf
    common: bool = True
    standing: Standing = Standing.STATED
    value: float = 0.0
    note: str = ""

    def __post_init__(self) -> None:
        u = self.standard_uncertainty
        absent = self.standing in (Standing.NOT_STATED, Standing.NOT_APPLICABLE)
        if (u is None) != absent:
            raise BadInput(
                f"{self.name}: {self.standing.value}, with "
                f"{'no' if u is None else 'an'} uncertainty: make the two agree"
            )
        if u is not None and not (math.isfinite(u) and u >= 0):
            raise BadInput(
                f"{self.name}: an uncertainty of {u:g} cannot be: give a number not negative"
            )
        if not self.freedom > 0:
            raise BadInput(
                f"{self.name}: {self.freedom:g} degrees of freedom cannot be: give more than none"
            )
        if not (math.isfinite(self.sensitivity) and math.isfinite(self.value)):
            raise BadInput(f"{self.name}: its value or its sensitivity is no number: give both")

    @property
    def half_width(self) -> float | None:
        """Half the width between the limits, in ``unit``; None where there are none."""
        u = self.standard_uncertainty
        return None if u is None else limits_of_sd(u, self.distribution)

    @property
    def signed_u(self) -> float:
        """c_i u_i, with the sign of the sensitivity; 0 for a line without an uncertainty."""
        u = self.standard_uncertainty
        return 0.0 if u is None else self.sensitivity * u


def within(
    name: str,
    half_width: float,
    unit: str,
    *,
    distribution: Distribution = Distribution.RECTANGULAR,
    sensitivity: float = 1.0,
    freedom: float = math.inf,
    common: bool = True,
    standing: Standing = Standing.STATED,
    value: float = 0.0,
    note: str = "",
) -> Contribution:
    """A contribution of which limits of ± ``half_width`` are known. Raises BadInput if it cannot
    be.
    """
    try:
        u = sd_of_limits(half_width, distribution)
    except BadInput as error:
        raise BadInput(f"{name}: {error}") from error
    return Contribution(
        name, u, unit, sensitivity, distribution, freedom, common, standing, value, note
    )


def absent(
    name: str, unit: str, note: str, *, standing: Standing = Standing.NOT_STATED
) -> Contribution:
    """A line without an uncertainty; ``note`` says what is missing, or why it does not apply."""
    return Contribution(name, None, unit, standing=standing, note=note)


@dataclass(frozen=True, slots=True)
class Correlation:
    """Correlation coefficient ``r`` of two inputs, by their names."""

    first: str
    second: str
    r: float


@dataclass(frozen=True, slots=True)
class Budget:
    """The uncertainty of one result.

    ``quantity``: what it is, in words; ``value`` in ``unit``. Raises BadInput for two lines of one
    name, and for correlations that cannot be.
    """

    quantity: str
    value: float
    unit: str
    contributions: tuple[Contribution, ...]
    correlations: tuple[Correlation, ...] = ()
    level: float = LEVEL

    def __post_init__(self) -> None:
        names = [line.name for line in self.contributions]
        for name in names:
            if names.count(name) > 1:
                raise BadInput(f"two lines are called {name!r}: give each a name of its own")
        for pair in self.correlations:
            _check_pair(pair, {line.name: line for line in self.contributions})
        if self.correlations and np.linalg.eigvalsh(self.correlation_matrix).min() < -1e-9:
            raise BadInput("these correlations contradict each other: check their signs")
        coverage_factor(self.level)

    @property
    def correlation_matrix(self) -> F64:
        """r_ij, shape (n, n), in the order of the contributions."""
        index = {line.name: i for i, line in enumerate(self.contributions)}
        matrix = np.eye(len(index))
        for pair in self.correlations:
            i, j = index[pair.first], index[pair.second]
            matrix[i, j] = matrix[j, i] = pair.r
        return matrix

    @property
    def covariance(self) -> F64:
        """Covariance of the contributions to the result, (n, n), in its unit squared."""
        u = np.array([line.signed_u for line in self.contributions])
        return np.asarray(self.correlation_matrix * np.outer(u, u))

    @property
    def combined_u(self) -> float:
        """Combined standard uncertainty, in the result's unit, of all lines that have one."""
        return _root(self.covariance.sum())

    @property
    def independent_u(self) -> float:
        """The part of ``combined_u`` that is new in each reading."""
        return self._part(common=False)

    @property
    def common_u(self) -> float:
        """The part of ``combined_u`` that all readings share: averaging leaves it as it is."""
        return self._part(common=True)

    def _part(self, *, common: bool) -> float:
        chosen = np.array([line.common is common for line in self.contributions], dtype=bool)
        return _root(self.covariance[np.ix_(chosen, chosen)].sum())

    @property
    def shares(self) -> tuple[float, ...]:
        """Share of each line in the variance; they sum to 1.

        A line takes half of what it has together with another, so a share may be negative where
        correlated inputs partly cancel. All 0 where there is no uncertainty.
        """
        rows = self.covariance.sum(axis=1)
        total = rows.sum()
        return tuple((rows / total if total > 0 else np.zeros(len(rows))).tolist())

    @property
    def effective_freedom(self) -> float:
        """Degrees of freedom of ``combined_u``, after Welch and Satterthwaite.

        The formula holds for independent contributions only. Correlated inputs are therefore taken
        together first: a sum of values observed together, n times each, has the n - 1 degrees of
        freedom of each of them; where theirs differ, the least counts.
        """
        covariance = self.covariance
        groups = correlated_groups(self.correlation_matrix)
        variances = [max(0.0, float(covariance[np.ix_(g, g)].sum())) for g in groups]
        freedoms = [min(self.contributions[i].freedom for i in group) for group in groups]
        return effective_freedom(variances, freedoms)

    @property
    def coverage_factor(self) -> float:
        """Student's t for ``level`` and ``effective_freedom``."""
        return coverage_factor(self.level, self.effective_freedom)

    @property
    def expanded_u(self) -> float:
        """Half width of the interval about ``value`` that holds the share ``level``."""
        return self.coverage_factor * self.combined_u

    def named(self, standing: Standing) -> tuple[str, ...]:
        """Names of the lines of this standing."""
        return tuple(line.name for line in self.contributions if line.standing is standing)


def correlated_groups(correlation: F64) -> list[list[int]]:
    """Indices of the inputs (n, n), those tied by a correlation, also over others, together."""
    tied = np.abs(correlation) > 0
    for _ in range(len(tied).bit_length()):  # each pass doubles the length of the chains
        tied = (tied.astype(int) @ tied.astype(int)) > 0
    return [np.flatnonzero(row).tolist() for i, row in enumerate(tied) if row.argmax() == i]


def _root(variance: float) -> float:
    return math.sqrt(max(0.0, float(variance)))  # rounding may make it -0


def _check_pair(pair: Correlation, lines: dict[str, Contribution]) -> None:
    both = f"correlation of {pair.first!r} and {pair.second!r}"
    for name in (pair.first, pair.second):
        if name not in lines:
            raise BadInput(f"{both}: there is no line {name!r}: use the names of the lines")
    if pair.first == pair.second or not -1 <= pair.r <= 1:
        raise BadInput(f"{both}: {pair.r:g} cannot be: take two lines and -1 to 1")
    if lines[pair.first].common is not lines[pair.second].common:
        raise BadInput(f"{both}: one is common to all readings, the other not: make them alike")
