"""Propagation of distributions: the check of a budget that makes no approximation.

JCGM 101:2008 (supplement 1 to the GUM). The inputs are drawn from their distributions, the model
is evaluated for each draw, and mean, standard deviation and coverage interval of the results are
taken as they are.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from readout.angle.budget import LEVEL, Budget, Contribution, correlated_groups
from readout.angle.budget_of_model import Model
from readout.angle.distributions import Distribution, draw_unit
from readout.errors import BadInput
from readout.model import F64

TRIALS = 200_000
"""JCGM 101:2008, 7.2.2 asks for 10^4 times 1/(1 - level); this is what it says for 0.95"""


@dataclass(frozen=True, slots=True)
class Propagated:
    """What came out of ``trials`` draws, in the result's unit.

    ``low, high``: the coverage interval with equal shares left out below and above.
    ``shortest_low, shortest_high``: the shortest one that holds the same share.
    """

    value: float
    standard_uncertainty: float
    low: float
    high: float
    shortest_low: float
    shortest_high: float
    level: float
    trials: int


def draw_inputs(
    inputs: Sequence[Contribution],
    correlation: F64 | None,
    *,
    trials: int,
    rng: np.random.Generator,
    doubtful: bool = True,
) -> F64:
    """Values of the inputs, shape (n, trials), each in its own unit.

    Lines without an uncertainty stay at their value. ``doubtful``: degrees of freedom count, as
    JCGM 101 has it, so that few of them spread the draws; without, each input is drawn with
    exactly its standard uncertainty. Correlated inputs must be normal, of one number of degrees of
    freedom (a multivariate t: JCGM 102:2011, 5.3.2); raises BadInput else.
    """
    drawn = np.empty((len(inputs), trials))
    for group in correlated_groups(np.eye(len(inputs)) if correlation is None else correlation):
        lines = [inputs[i] for i in group]
        freedom = lines[0].freedom if doubtful else math.inf
        if correlation is None or len(group) == 1:
            drawn[group[0]] = draw_unit(lines[0].distribution, freedom, trials, rng)
            continue
        _refuse_unlike(lines)
        within = correlation[np.ix_(group, group)]
        drawn[group] = rng.multivariate_normal(
            np.zeros(len(group)), within, trials, method="eigh"
        ).T
        if math.isfinite(freedom):
            drawn[group] /= np.sqrt(rng.chisquare(freedom, trials) / freedom)
    value = np.array([line.value for line in inputs])
    u = np.array([line.standard_uncertainty or 0.0 for line in inputs])
    return np.asarray(value[:, None] + u[:, None] * drawn)


def _refuse_unlike(tied: Sequence[Contribution]) -> None:
    if any(line.distribution is not Distribution.NORMAL for line in tied):
        raise BadInput("correlated inputs can only be drawn as normal ones: state them so")
    if len({line.freedom for line in tied}) > 1:
        raise BadInput("correlated inputs need one number of degrees of freedom: state it so")


def summarise(results: F64, level: float = LEVEL) -> Propagated:
    """Mean, standard deviation and coverage intervals of results, shape (trials,).

    JCGM 101:2008, 7.6 and 7.7. Raises BadInput for fewer draws than the level needs.
    """
    ordered = np.sort(results)
    trials = ordered.size
    held = round(level * trials)
    if not 0 < held < trials:
        raise BadInput(f"{trials} draws cannot show a level of {level:g}: take more")
    left_out = trials - held
    starts = ordered[:left_out]
    shortest = int(np.argmin(ordered[held:] - starts))
    below = left_out // 2
    return Propagated(
        float(ordered.mean()),
        float(ordered.std(ddof=1)),
        float(ordered[below]),
        float(ordered[below + held]),
        float(ordered[shortest]),
        float(ordered[shortest + held]),
        level,
        trials,
    )


def propagate_model(
    model: Model,
    inputs: Sequence[Contribution],
    rng: np.random.Generator,
    *,
    correlation: F64 | None = None,
    trials: int = TRIALS,
    level: float = LEVEL,
    doubtful: bool = True,
) -> Propagated:
    """The distribution of ``model``'s result; arguments as for ``draw_inputs``."""
    drawn = draw_inputs(inputs, correlation, trials=trials, rng=rng, doubtful=doubtful)
    return summarise(np.asarray(model(drawn)), level)


def propagate(
    budget: Budget, rng: np.random.Generator, *, trials: int = TRIALS, doubtful: bool = True
) -> Propagated:
    """The distribution of the budget's result, by its own sensitivities."""
    lines = budget.contributions
    sensitivity = np.array([line.sensitivity for line in lines])
    value = np.array([line.value for line in lines])

    def linear(x: F64) -> F64:
        return np.asarray(budget.value + sensitivity @ (x - value[:, None]))

    return propagate_model(
        linear,
        lines,
        rng,
        correlation=budget.correlation_matrix,
        trials=trials,
        level=budget.level,
        doubtful=doubtful,
    )


def agrees(budget: Budget, drawn: Propagated, *, digits: int = 2) -> bool:
    """Whether the budget's interval is that of the draws, to ``digits`` of its uncertainty.

    JCGM 101:2008, clause 8: both ends within half a unit of the last of these digits.
    """
    u = budget.combined_u
    if u == 0:
        return drawn.low == drawn.high == budget.value
    tolerance = 0.5 * 10.0 ** (math.floor(math.log10(u)) - digits + 1)
    low = abs(budget.value - budget.expanded_u - drawn.low)
    high = abs(budget.value + budget.expanded_u - drawn.high)
    return max(low, high) <= tolerance
