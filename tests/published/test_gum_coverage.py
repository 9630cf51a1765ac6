"""Coverage factors and degrees of freedom against JCGM 100:2008 (GUM), annex G."""

import math

import pytest
from scipy import stats

from readout.angle.budget import Contribution
from readout.angle.budget_of_model import budget_of_model
from readout.angle.coverage import coverage_factor, effective_freedom, freedom_of_doubt

# Table G.2, entries as a public library's own test quotes them
TABLE_G2 = [
    (1, 0.6827, 1.84),
    (1, 0.95, 12.71),
    (1, 0.9973, 235.80),
    (2, 0.9973, 19.21),
    (5, 0.9973, 5.51),
    (10, 0.90, 1.81),
    (11, 0.99, 3.11),
    (20, 0.90, 1.72),
    (20, 0.95, 2.09),
    (math.inf, 0.9545, 2.00),
    (math.inf, 0.9973, 3.00),
]


@pytest.mark.parametrize(("freedom", "level", "published"), TABLE_G2)
def test_student_t_of_table_g2(freedom, level, published):
    """The table's t(1, 99.73 %) is 235.80: it stands for 3 sd, a level of 99.7300204 %."""
    exact = {0.6827: 0.682689492, 0.9545: 0.954499736, 0.9973: 0.997300204}
    found = coverage_factor(exact.get(level, level), freedom)
    assert found == pytest.approx(published, abs=0.0051)


@pytest.mark.parametrize("freedom", [1, 2.5, 16.75, 1e4])
def test_an_independent_implementation(freedom):
    """scipy.stats integrates the density by another route than scipy.special inverts it."""
    k = coverage_factor(0.95, freedom)
    assert stats.t(freedom).cdf(k) - stats.t(freedom).cdf(-k) == pytest.approx(0.95, abs=1e-12)


def product_of_three():
    """G.4.1: y = b x1 x2 x3, with 10, 5 and 15 observations."""
    inputs = [
        Contribution("x1", 0.0025, "1", freedom=9, value=1.0),
        Contribution("x2", 0.0057, "1", freedom=4, value=1.0),
        Contribution("x3", 0.0082, "1", freedom=14, value=1.0),
    ]
    return budget_of_model("product", "1", lambda x: x[0] * x[1] * x[2], inputs)


def test_g41_welch_satterthwaite():
    """GUM G.4.1; values from memory, confirmed by computation."""
    budget = product_of_three()
    assert budget.combined_u == pytest.approx(0.0103, abs=5e-5)
    assert budget.effective_freedom == pytest.approx(19.0, abs=0.05)
    assert budget.coverage_factor == pytest.approx(2.09, abs=0.005)
    assert budget.expanded_u == pytest.approx(0.022, abs=5e-4)


def test_g42_a_quarter_in_doubt_is_eight():
    """GUM G.4.2, the example below the formula; value from memory."""
    assert freedom_of_doubt(0.25) == 8
    assert freedom_of_doubt(0.0) == math.inf


def test_equal_shares_add_their_freedom():
    """Exact property: n equal contributions of nu degrees have n nu."""
    assert effective_freedom([2.0] * 5, [3.0] * 5) == pytest.approx(15, rel=1e-14)
    assert effective_freedom([2.0, 5.0], [math.inf, math.inf]) == math.inf
