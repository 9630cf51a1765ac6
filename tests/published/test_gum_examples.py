"""The worked examples of JCGM 100:2008 (GUM), annex H, through the budget.

The straight line of H.3 itself stands in ``test_norris.py``; here is what the annex does with it.
"""

import math

import numpy as np
import pytest

from readout.angle.budget import Budget, Contribution, Correlation, Standing, within
from readout.angle.budget_of_model import budget_of_model
from readout.angle.coverage import coverage_factor
from readout.angle.distributions import Distribution
from readout.angle.monte_carlo import propagate_model
from readout.errors import BadInput

SEED = 61001


def end_gauge_inputs():
    """H.1: lengths in nm, temperatures in kelvin. Inputs as a public library quotes the annex."""
    return [
        Contribution("standard", 25, "nm", freedom=18, value=50_000_623),
        Contribution("difference", 5.8, "nm", freedom=24, value=215),
        Contribution("comparator, random", 3.9, "nm", freedom=5),
        Contribution("comparator, systematic", 6.7, "nm", freedom=8),
        within("expansion", 2e-6, "1/K", value=11.5e-6),
        within("difference of expansion", 1e-6, "1/K", freedom=50),
        within("difference of temperature", 0.05, "K", freedom=2),
        Contribution("mean temperature", 0.2, "K", value=-0.1),
        within("cycle of temperature", 0.5, "K", distribution=Distribution.ARCSINE),
    ]


def end_gauge(x):
    """l = ls + d - ls (d_alpha theta + alpha_s d_theta), GUM (H.2)."""
    standard, d0, d1, d2, alpha, d_alpha, d_theta, theta, cycle = x
    return standard + d0 + d1 + d2 - standard * (d_alpha * (theta + cycle) + alpha * d_theta)


def test_h1_end_gauge():
    budget = budget_of_model("length", "nm", end_gauge, end_gauge_inputs(), level=0.99)
    parts = {line.name: abs(line.signed_u) for line in budget.contributions}
    assert budget.value == pytest.approx(50_000_838, abs=0.5)
    assert budget.combined_u == pytest.approx(32, abs=0.5)
    assert parts["standard"] == pytest.approx(25, abs=0.05)
    assert parts["difference of temperature"] == pytest.approx(16.599, abs=5e-3)
    assert parts["difference of expansion"] == pytest.approx(2.887, abs=5e-3)
    assert parts["expansion"] == parts["mean temperature"] == parts["cycle of temperature"] == 0


def test_h1_degrees_of_freedom_and_expanded_uncertainty():
    """Published statement from memory, confirmed by computation. The annex rounds as it goes: 16
    degrees (cut off), t99 = 2.92, u = 32 nm.
    """
    budget = budget_of_model("length", "nm", end_gauge, end_gauge_inputs(), level=0.99)
    assert budget.effective_freedom == pytest.approx(16.7, abs=0.1)
    t99 = coverage_factor(0.99, math.floor(budget.effective_freedom))
    assert t99 == pytest.approx(2.92, abs=0.005)
    assert t99 * round(budget.combined_u) == pytest.approx(93, abs=0.5)
    assert budget.expanded_u == pytest.approx(93, abs=2)  # without cutting off and rounding
    d = Budget("difference", 215, "nm", tuple(end_gauge_inputs()[1:4]))
    assert d.combined_u == pytest.approx(9.7, abs=0.05)
    rounded = d.effective_freedom * (9.7 / d.combined_u) ** 4  # the annex rounds u(d) first
    assert rounded == pytest.approx(25.6, abs=0.05)


def test_h1_second_order_terms_through_monte_carlo():
    """H.1.7: with the terms of second order u is 34 nm, which the linear budget cannot see."""
    drawn = propagate_model(
        end_gauge,
        end_gauge_inputs(),
        np.random.default_rng(SEED),
        trials=400_000,
        doubtful=False,
    )
    print(f"seed {SEED}: u {drawn.standard_uncertainty:.2f} nm")
    assert drawn.value == pytest.approx(50_000_838, abs=0.5)
    assert drawn.standard_uncertainty == pytest.approx(34, abs=0.5)


VOLT = np.array([5.007, 4.994, 5.005, 4.990, 4.999])
MILLIAMPERE = np.array([19.663, 19.639, 19.640, 19.685, 19.678])
PHASE = np.array([1.0456, 1.0438, 1.0468, 1.0428, 1.0433])


def impedance():
    """H.2, table H.2: the means of five simultaneous observations, and their correlations."""
    rows = np.stack([VOLT, MILLIAMPERE * 1e-3, PHASE])
    u = rows.std(axis=1, ddof=1) / math.sqrt(5)
    r = np.corrcoef(rows)
    names, units = ("V", "I", "phi"), ("V", "A", "rad")
    inputs = [
        Contribution(*given, freedom=4, value=mean)
        for *given, mean in zip(names, u, units, rows.mean(axis=1), strict=True)
    ]
    pairs = [Correlation(names[i], names[j], float(r[i, j])) for i, j in ((0, 1), (0, 2), (1, 2))]
    return inputs, pairs


MODELS = {
    "R": lambda x: x[0] / x[1] * np.cos(x[2]),
    "X": lambda x: x[0] / x[1] * np.sin(x[2]),
    "Z": lambda x: x[0] / x[1],
}


def test_h2_inputs():
    inputs, pairs = impedance()
    volt, ampere, phase = inputs
    assert volt.value == pytest.approx(4.999, abs=5e-4)
    assert volt.standard_uncertainty == pytest.approx(0.0032, abs=5e-5)
    assert ampere.value * 1e3 == pytest.approx(19.661, abs=5e-4)
    assert ampere.standard_uncertainty * 1e3 == pytest.approx(0.0095, abs=5e-5)
    assert phase.value == pytest.approx(1.04446, abs=5e-6)
    assert phase.standard_uncertainty == pytest.approx(0.00075, abs=5e-6)
    assert [pair.r for pair in pairs] == pytest.approx([-0.36, 0.86, -0.65], abs=0.005)


@pytest.mark.parametrize(
    ("name", "value", "u"), [("R", 127.732, 0.071), ("X", 219.847, 0.295), ("Z", 254.260, 0.236)]
)
def test_h2_impedance(name, value, u):
    inputs, pairs = impedance()
    budget = budget_of_model(name, "ohm", MODELS[name], inputs, correlations=pairs)
    assert budget.value == pytest.approx(value, abs=5e-4)
    assert budget.combined_u == pytest.approx(u, abs=6e-4)
    assert sum(budget.shares) == pytest.approx(1, abs=1e-12)


def test_sensitivities_of_h2_are_the_derivatives():
    """R = (V / I) cos phi: its partial derivatives in closed form."""
    inputs, pairs = impedance()
    volt, ampere, phase = (line.value for line in inputs)
    budget = budget_of_model("R", "ohm", MODELS["R"], inputs, correlations=pairs)
    exact = (
        math.cos(phase) / ampere,
        -volt / ampere**2 * math.cos(phase),
        -volt / ampere * math.sin(phase),
    )
    assert [line.sensitivity for line in budget.contributions] == pytest.approx(exact, rel=1e-6)


@pytest.mark.parametrize(
    ("first", "second", "r"), [("R", "X", -0.588), ("R", "Z", -0.485), ("X", "Z", 0.993)]
)
def test_h2_correlation_of_results(first, second, r):
    """Third digit from memory, two digits as a public library quotes them.

    var(a + b) = var a + var b + 2 cov(a, b): all three are budgets of their own.
    """
    inputs, pairs = impedance()

    def u2(model):
        return budget_of_model("", "ohm", model, inputs, correlations=pairs).combined_u ** 2

    a, b = MODELS[first], MODELS[second]
    cov = (u2(lambda x: a(x) + b(x)) - u2(a) - u2(b)) / 2
    assert cov / math.sqrt(u2(a) * u2(b)) == pytest.approx(r, abs=1e-3)


@pytest.mark.parametrize("name", list(MODELS))
def test_h2_evaluated_one_by_one_is_the_same(name):
    """GUM H.2.4, approach 2: the result of each of the five sets, their mean and its scatter.

    It has n - 1 = 4 degrees of freedom, which is what the correlated inputs must come to: the
    formula for independent ones would give more. The two ways differ by what is not linear within
    the scatter, of the order of its relative size, 1e-3 here.
    """
    inputs, pairs = impedance()
    budget = budget_of_model(name, "ohm", MODELS[name], inputs, correlations=pairs)
    each = MODELS[name](np.stack([VOLT, MILLIAMPERE * 1e-3, PHASE]))
    assert budget.combined_u == pytest.approx(each.std(ddof=1) / math.sqrt(5), rel=4e-3)
    assert budget.effective_freedom == pytest.approx(4, rel=1e-12)


def thermometer(correlated=True):
    """H.3: correction at 30 degrees from the line's two parameters, 9 degrees of freedom.

    Full digits of the parameters as recomputed from table H.6.
    """
    pair = Correlation("y1", "y2", -0.93042960309)
    return Budget(
        "correction",
        -0.14937681273,
        "K",
        (
            Contribution("y1", 0.002877597835159957, "K", freedom=9),
            Contribution("y2", 0.0006679387732278323, "1", sensitivity=10, freedom=9),
        ),
        (pair,) if correlated else (),
    )


def test_h3_prediction_needs_the_correlation():
    """Published: b(30) with u = 0.0041; without the correlation it would be 0.0073."""
    assert thermometer().combined_u == pytest.approx(0.0041, abs=5e-5)
    assert thermometer().effective_freedom == pytest.approx(9, rel=1e-12)
    assert thermometer(correlated=False).combined_u > 0.007


def test_h3_contradicting_correlations_are_refused():
    inputs, _ = impedance()
    pairs = (
        Correlation("V", "I", 0.9),
        Correlation("V", "phi", 0.9),
        Correlation("I", "phi", -0.9),
    )
    with pytest.raises(BadInput, match="contradict"):
        Budget("", 0.0, "ohm", tuple(inputs), pairs)
    assert all(line.standing is Standing.STATED for line in inputs)
