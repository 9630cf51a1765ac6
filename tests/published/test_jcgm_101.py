"""Propagation of distributions against JCGM 101:2008 (supplement 1 to the GUM), clause 9.

All published figures of this clause are values from memory; where said, they were confirmed by an
exact computation. Seeds are printed; tolerances follow from the number of draws.
"""

import math

import numpy as np
import pytest

from readout.angle.budget import Budget, Contribution, within
from readout.angle.distributions import Distribution
from readout.angle.monte_carlo import agrees, propagate, propagate_model

SEED = 61101
TRIALS = 400_000


def sum_of(*lines):
    return Budget("sum", 0.0, "1", lines)


def run(budget, seed, **more):
    drawn = propagate(budget, np.random.default_rng(seed), trials=TRIALS, **more)
    print(f"seed {seed}: u {drawn.standard_uncertainty:.4f} [{drawn.low:.4f}, {drawn.high:.4f}]")
    return drawn


def end_sd(density):
    """Standard deviation of a drawn 2.5 % end where the density is this: order statistics."""
    return math.sqrt(0.025 * 0.975 / TRIALS) / density


def test_922_four_normals():
    budget = sum_of(*(Contribution(f"x{i}", 1.0, "1") for i in range(4)))
    assert budget.combined_u == pytest.approx(2.0, rel=1e-12)
    assert budget.expanded_u == pytest.approx(3.92, abs=0.005)
    drawn = run(budget, SEED)
    tolerance = 4 * end_sd(math.exp(-(1.96**2) / 2) / math.sqrt(2 * math.pi) / 2)
    assert tolerance < 0.04
    assert (drawn.low, drawn.high) == pytest.approx((-3.92, 3.92), abs=tolerance)
    assert agrees(budget, drawn)


def test_923_four_rectangulars():
    """The exact end, 3.8794, is confirmed by computation: closed form of the sum of four."""
    budget = sum_of(*(within(f"x{i}", math.sqrt(3), "1") for i in range(4)))
    assert budget.combined_u == pytest.approx(2.0, rel=1e-12)
    assert budget.expanded_u == pytest.approx(3.92, abs=0.005)
    drawn = run(budget, SEED + 1)
    # density of the sum near its end: (4a - s)^3 / (6 (2a)^4) of four rectangulars of ±a
    a = math.sqrt(3)
    tolerance = 4 * end_sd((4 * a - 3.8794) ** 3 / (6 * (2 * a) ** 4))
    assert tolerance < 0.04
    assert (drawn.low, drawn.high) == pytest.approx((-3.8794, 3.8794), abs=tolerance)
    assert drawn.high < budget.expanded_u  # four rectangulars have shorter tails than a normal


def test_924_one_rectangular_ten_times_as_wide():
    """The budget overstates by a sixth; the supplement's own example of where it fails."""
    lines = [within(f"x{i}", math.sqrt(3), "1") for i in range(3)]
    budget = sum_of(*lines, within("x3", 10 * math.sqrt(3), "1"))
    assert budget.combined_u == pytest.approx(math.sqrt(103), rel=1e-12)
    assert budget.expanded_u == pytest.approx(19.9, abs=0.05)
    drawn = run(budget, SEED + 2)
    assert (drawn.low, drawn.high) == pytest.approx((-17.0, 17.0), abs=0.06)
    assert not agrees(budget, drawn)


def test_95_end_gauge():
    """Published: 838 nm, u 36 nm, shortest 99 % interval [745, 932] nm (about 50 mm).

    The supplement draws Student's t for observed inputs and limits that are themselves in doubt,
    which is what degrees of freedom do here. The integers of its table of inputs: 25 (18), 6 (24),
    4 (5), 7 (8); 36 against 32 of the linear budget is what this example is about.
    """
    inputs = [
        Contribution("standard", 25, "nm", freedom=18, value=50_000_623),
        Contribution("difference", 6, "nm", freedom=24, value=215),
        Contribution("random", 4, "nm", freedom=5),
        Contribution("systematic", 7, "nm", freedom=8),
        within("expansion", 2e-6, "1/K", value=11.5e-6),
        within("difference of expansion", 1e-6, "1/K", freedom=50),
        within("difference of temperature", 0.05, "K", freedom=2),
        Contribution("mean temperature", 0.2, "K", value=-0.1),
        within("cycle of temperature", 0.5, "K", distribution=Distribution.ARCSINE),
    ]

    def length(x):
        standard, d0, d1, d2, alpha, d_alpha, d_theta, theta, cycle = x
        total = standard + d0 + d1 + d2
        return total - standard * (d_alpha * (theta + cycle) + alpha * d_theta)

    drawn = propagate_model(
        length, inputs, np.random.default_rng(SEED + 3), trials=TRIALS, level=0.99
    )
    print(f"seed {SEED + 3}: {drawn}")
    assert drawn.value - 50_000_000 == pytest.approx(838, abs=0.5)
    assert drawn.standard_uncertainty == pytest.approx(36, abs=0.5)
    ends = (drawn.shortest_low - 50_000_000, drawn.shortest_high - 50_000_000)
    assert ends == pytest.approx((745, 932), abs=2.5)
