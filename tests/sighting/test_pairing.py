"""Which rough lines may be the arms of one reticle."""

import math

import pytest

from readout.sighting.fold import Line
from readout.sighting.pairing import angle_deg, both_ways, pairs, turned_over
from readout.sighting.rough import RoughArm, RoughArms


def arm(turn_deg, *, level=False, polarity=1, strength=1.0):
    slope = math.tan(math.radians(turn_deg))
    return RoughArm(Line(100.0, slope if level else -slope, 80.0), polarity, 4.0, strength)


@pytest.mark.parametrize("turn_deg", [-40.0, 0.0, 3.0, 44.0])
def test_arms_turned_together_are_square(turn_deg):
    assert angle_deg(arm(turn_deg).line, arm(turn_deg, level=True).line) == pytest.approx(90.0)
    skewed = arm(turn_deg + 5, level=True)
    assert angle_deg(arm(turn_deg).line, skewed.line) == pytest.approx(85.0)


def test_a_line_turned_over_is_the_same_line():
    line = Line(100.0, 0.9, 80.0)
    over = turned_over(line, 50.0)
    for y in (0.0, 60.0, 200.0):
        assert over.x_at(line.x_at(y)) == pytest.approx(y)


def test_two_arms_in_one_list_still_make_a_pair():
    """At 45 degrees and out of square both lines may pass for upright ones."""
    found = RoughArms((arm(46.0), arm(-42.0)), ())
    assert pairs(found) == []
    assert len(pairs(both_ways(found, 200, 200))) == 2


def test_the_strongest_pair_of_one_polarity_comes_first():
    uprights = (arm(1.0, strength=5.0), arm(1.0, polarity=-1, strength=9.0))
    levels = (arm(1.0, level=True, strength=3.0), arm(1.0, level=True, strength=2.0))
    order = pairs(RoughArms(uprights, levels))
    assert [upright.strength + level.strength for upright, level in order] == [8.0, 7.0]


def test_lines_at_a_sharp_angle_are_no_reticle():
    assert pairs(RoughArms((arm(0.0),), (arm(40.0, level=True),))) == []
