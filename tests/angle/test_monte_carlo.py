"""The law of propagation against drawn distributions, and the intervals against counting."""

import math

import numpy as np
import pytest

from readout.angle.budget import Budget, Contribution, Correlation, absent, within
from readout.angle.coverage import coverage_factor
from readout.angle.distributions import Distribution
from readout.angle.monte_carlo import agrees, draw_inputs, propagate, summarise
from readout.errors import BadInput

SEED = 61301
TRIALS = 200_000


def mixed():
    """Lines of every kind, two of them correlated."""
    return Budget(
        "angle",
        12.0,
        "arcsec",
        (
            Contribution("noise", 0.02, "arcsec", common=False),
            within("seating", 0.05, "arcsec"),
            within("wave", 0.03, "arcsec", distribution=Distribution.ARCSINE, value=4.0),
            within("two feet", 0.4, "um", distribution=Distribution.TRIANGULAR, sensitivity=0.2),
            Contribution("scale", 0.001, "1", sensitivity=-30.0, value=1.0),
            Contribution("turn", 0.002, "rad", sensitivity=15.0),
            absent("air", "K/m", ""),
        ),
        (Correlation("scale", "turn", 0.7),),
    )


def test_the_law_of_propagation():
    budget = mixed()
    print(f"seed {SEED}")
    drawn = propagate(budget, np.random.default_rng(SEED), trials=TRIALS)
    u = budget.combined_u
    assert drawn.value == pytest.approx(12.0, abs=4 * u / math.sqrt(TRIALS))
    assert drawn.standard_uncertainty == pytest.approx(u, rel=4 / math.sqrt(2 * TRIALS))
    assert agrees(budget, drawn, digits=1)  # limits keep it from being normal to two digits


def test_the_correlation_is_drawn():
    budget = mixed()
    print(f"seed {SEED}")
    drawn = draw_inputs(
        budget.contributions,
        budget.correlation_matrix,
        trials=TRIALS,
        rng=np.random.default_rng(SEED),
    )
    r = np.corrcoef(drawn[:6])
    expected = np.eye(6)
    expected[4, 5] = expected[5, 4] = 0.7
    assert r == pytest.approx(expected, abs=4 / math.sqrt(TRIALS))
    assert np.all(drawn[6] == 0)


def test_two_correlated_groups_stay_independent():
    """Each group of a multivariate t has a chi-square of its own: |a| and |c| do not hang
    together, |a| and |b| do.
    """
    lines = tuple(Contribution(name, 1.0, "1", freedom=6) for name in "abcd")
    pairs = (Correlation("a", "b", 1e-9), Correlation("c", "d", 1e-9))
    budget = Budget("", 0.0, "1", lines, pairs)
    print(f"seed {SEED}")
    drawn = draw_inputs(
        lines, budget.correlation_matrix, trials=TRIALS, rng=np.random.default_rng(SEED)
    )
    size = np.corrcoef(np.abs(drawn))
    assert abs(size[0, 2]) < 5 / math.sqrt(TRIALS)
    assert size[0, 1] > 20 / math.sqrt(TRIALS)


def test_welch_satterthwaite_covers_what_it_says():
    """Means of 4 and 12 normal observations, and a known part: the interval built from what each
    experiment shows must hold the truth in 95 % of them.
    """
    n, repeats = (4, 12), 20_000
    rng = np.random.default_rng(SEED)
    print(f"seed {SEED}")
    samples = [rng.normal(0, sd, (repeats, k)) for sd, k in zip((1.0, 1.2), n, strict=True)]
    means = samples[0].mean(axis=1) + samples[1].mean(axis=1) + rng.normal(0, 0.1, repeats)
    sds = [s.std(axis=1, ddof=1) / math.sqrt(s.shape[1]) for s in samples]
    held = short = 0
    for mean, first, second in zip(means, *sds, strict=True):
        budget = Budget(
            "sum",
            mean,
            "1",
            (
                Contribution("first", first, "1", freedom=n[0] - 1),
                Contribution("second", second, "1", freedom=n[1] - 1),
                Contribution("known", 0.1, "1"),
            ),
        )
        held += abs(mean) <= budget.expanded_u
        short += abs(mean) <= coverage_factor(0.95) * budget.combined_u
    se = math.sqrt(0.95 * 0.05 / repeats)
    print(f"held {held / repeats:.4f}, with a factor of 1.96 {short / repeats:.4f}, se {se:.4f}")
    assert held / repeats == pytest.approx(0.95, abs=0.01)  # the formula is an approximation
    assert short / repeats < 0.93


def test_intervals_of_known_values():
    """0..999: 950 steps lie between the ends, whatever is left out below."""
    drawn = summarise(np.random.default_rng(SEED).permutation(1000.0 + np.arange(1000)), 0.95)
    assert (drawn.low, drawn.high) == (1025, 1975)
    assert drawn.value == 1499.5
    # pressed together at the low end: the shortest interval starts there
    skew = summarise(np.arange(1000.0) ** 3, 0.95)
    assert skew.shortest_low == 0
    assert skew.shortest_high == 950.0**3
    assert skew.low == 25.0**3


def test_disagreement_is_told():
    """One rectangular alone ends at ±1.645 sd for 95 %, not ±1.96."""
    budget = Budget("", 0.0, "1", (within("a", math.sqrt(3), "1"),))
    print(f"seed {SEED}")
    drawn = propagate(budget, np.random.default_rng(SEED), trials=TRIALS)
    assert drawn.high == pytest.approx(0.95 * math.sqrt(3), abs=0.01)
    assert not agrees(budget, drawn)


def test_nothing_uncertain():
    budget = Budget("", 3.0, "1", (absent("a", "1", ""),))
    drawn = propagate(budget, np.random.default_rng(SEED), trials=1000)
    assert (drawn.low, drawn.high, drawn.standard_uncertainty) == (3, 3, 0)
    assert agrees(budget, drawn)


def test_too_few_draws():
    with pytest.raises(BadInput, match="take more"):
        summarise(np.arange(5.0), 0.95)


def test_correlated_limits_are_refused():
    lines = (within("a", 1.0, "1"), Contribution("b", 1.0, "1"))
    budget = Budget("", 0.0, "1", lines, (Correlation("a", "b", 0.5),))
    with pytest.raises(BadInput, match="normal"):
        propagate(budget, np.random.default_rng(SEED), trials=1000)
    lines = (Contribution("a", 1.0, "1", freedom=3), Contribution("b", 1.0, "1"))
    budget = Budget("", 0.0, "1", lines, (Correlation("a", "b", 0.5),))
    with pytest.raises(BadInput, match="degrees of freedom"):
        propagate(budget, np.random.default_rng(SEED), trials=1000)
