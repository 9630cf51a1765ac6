"""Exact properties of a budget, and what it refuses."""

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from readout.angle.budget import (
    Budget,
    Contribution,
    Correlation,
    Standing,
    absent,
    within,
)
from readout.angle.coverage import coverage_factor, freedom_of_doubt
from readout.angle.distributions import Distribution
from readout.errors import BadInput


def budget(*lines, pairs=(), **more):
    return Budget("angle", 1.0, "arcsec", lines, tuple(pairs), **more)


def line(name, u, **more):
    return Contribution(name, u, "arcsec", **more)


@given(st.lists(st.floats(0.01, 100), min_size=1, max_size=8))
def test_sum_of_squares_and_shares(sizes):
    one = budget(*(line(f"{i}", u) for i, u in enumerate(sizes)))
    assert one.combined_u == pytest.approx(math.hypot(*sizes), rel=1e-12)
    assert sum(one.shares) == pytest.approx(1, abs=1e-12)
    assert one.shares[0] == pytest.approx((sizes[0] / one.combined_u) ** 2, rel=1e-12)


@given(st.floats(-1, 1), st.floats(0.1, 10), st.floats(-10, -0.1))
def test_two_correlated(r, a, b):
    """u^2 = a^2 + b^2 + 2 r a b, with signed sensitivities."""
    one = budget(line("a", a), line("b", 1.0, sensitivity=b), pairs=[Correlation("a", "b", r)])
    expected = max(0.0, a * a + b * b + 2 * r * a * b)
    assert one.combined_u == pytest.approx(math.sqrt(expected), rel=1e-9, abs=1e-6)


def test_what_is_common_to_both_cancels_in_a_difference():
    """The same ruler twice: fully correlated, opposite sensitivities."""
    one = budget(
        line("here", 3.0),
        line("there", 3.0, sensitivity=-1.0),
        pairs=[Correlation("here", "there", 1.0)],
    )
    assert one.combined_u == pytest.approx(0, abs=1e-7)
    assert one.effective_freedom == math.inf


def test_correlated_inputs_count_once_in_the_degrees_of_freedom():
    """Inputs observed together, 5 times each, in a chain a-b-c: 4 degrees, not 12."""
    lines = [line(name, 1.0, freedom=4) for name in "abc"]
    pairs = [Correlation("a", "b", 0.1), Correlation("b", "c", 0.1)]
    assert budget(*lines).effective_freedom == pytest.approx(12)
    assert budget(*lines, pairs=pairs).effective_freedom == pytest.approx(4)
    # where they differ, the least of them
    unlike = [lines[0], line("b", 1.0, freedom=9), line("c", 1.0)]
    assert budget(*unlike, pairs=pairs).effective_freedom == pytest.approx(4)
    # a further input, independent of the group: V = 3.4 and 2, 4 and 7 degrees
    both = budget(*lines, line("d", math.sqrt(2), freedom=7), pairs=pairs)
    assert both.effective_freedom == pytest.approx(5.4**2 / (3.4**2 / 4 + 2**2 / 7))


def test_independent_and_common_parts():
    one = budget(line("noise", 3.0, common=False), line("air", 4.0, common=False), line("f", 12.0))
    assert (one.independent_u, one.common_u) == pytest.approx((5.0, 12.0))
    assert one.combined_u == pytest.approx(13.0)


def test_limits_and_what_follows():
    one = within("seating", 0.3, "arcsec", distribution=Distribution.TRIANGULAR, sensitivity=-2.0)
    assert one.standard_uncertainty == pytest.approx(0.3 / math.sqrt(6))
    assert one.half_width == pytest.approx(0.3)
    assert one.signed_u == pytest.approx(-0.6 / math.sqrt(6))
    assert line("noise", 0.1).half_width is None


def test_not_stated_is_named_and_not_zero():
    one = budget(line("noise", 0.1), absent("air", "K/m", "distance not known"))
    assert one.named(Standing.NOT_STATED) == ("air",)
    assert one.contributions[1].standard_uncertainty is None
    assert one.combined_u == pytest.approx(0.1)


def test_nothing_at_all():
    one = budget(absent("noise", "arcsec", ""))
    assert (one.combined_u, one.expanded_u, one.shares) == (0, 0, (0,))
    assert budget().combined_u == 0


def test_expanded_uncertainty():
    one = budget(line("a", 2.0, freedom=10), level=0.99)
    assert one.expanded_u == pytest.approx(2 * coverage_factor(0.99, 10))


@pytest.mark.parametrize(
    ("make", "words"),
    [
        (lambda: budget(line("a", 1.0), line("a", 2.0)), "two lines are called 'a'"),
        (lambda: line("a", -1.0), "a: an uncertainty of -1"),
        (lambda: line("a", math.nan), "a: an uncertainty of nan"),
        (lambda: line("a", 1.0, freedom=0), "degrees of freedom"),
        (lambda: line("a", 1.0, sensitivity=math.inf), "sensitivity"),
        (lambda: line("a", None), "make the two agree"),
        (lambda: line("a", 0.0, standing=Standing.NOT_STATED), "make the two agree"),
        (lambda: within("a", -1.0, "px"), "a: limits of ±-1"),
        (lambda: budget(line("a", 1.0), level=95), "a level of 95 cannot be"),
        (lambda: budget(line("a", 1.0), pairs=[Correlation("a", "b", 0.1)]), "no line 'b'"),
        (lambda: budget(line("a", 1.0), pairs=[Correlation("a", "a", 0.1)]), "two lines"),
        (
            lambda: budget(line("a", 1.0), line("b", 1.0), pairs=[Correlation("a", "b", 1.1)]),
            "-1 to 1",
        ),
        (
            lambda: budget(
                line("a", 1.0), line("b", 1.0, common=False), pairs=[Correlation("a", "b", 0.5)]
            ),
            "make them alike",
        ),
    ],
)
def test_what_is_refused(make, words):
    with pytest.raises(BadInput, match=words) as raised:
        make()
    assert "\n" not in str(raised.value)


@pytest.mark.parametrize(
    "make",
    [
        lambda: coverage_factor(0.0),
        lambda: coverage_factor(1.0),
        lambda: coverage_factor(0.95, 0),
        lambda: coverage_factor(0.95, math.nan),
        lambda: freedom_of_doubt(-0.1),
    ],
)
def test_coverage_that_cannot_be(make):
    with pytest.raises(BadInput, match="cannot be"):
        make()
