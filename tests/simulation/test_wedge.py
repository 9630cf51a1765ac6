"""The traced wedge against formulas of thin prisms and against the law of refraction itself."""

import math

import numpy as np
import pytest

from readout.angle.optics import slopes_of_tilt, tilt_of_slopes
from readout.simulation.wedge import GlassWedge


def test_a_wedge_of_nothing_does_nothing():
    bare = GlassWedge(0.0, 1.5)
    assert bare.through(30.0, (120.0, -80.0)) == pytest.approx(slopes_of_tilt(120.0, -80.0))
    front, rear = bare.returns(30.0)
    assert front == pytest.approx((0.0, 0.0), abs=1e-15)
    assert rear == pytest.approx((0.0, 0.0), abs=1e-15)


def test_glass_of_air_does_nothing():
    assert GlassWedge(720.0, 1.0).through(30.0, (12.0, -8.0)) == pytest.approx(
        slopes_of_tilt(12.0, -8.0)
    )


@pytest.mark.parametrize("turn_deg", [0.0, 90.0, 200.0])
def test_the_beam_bends_towards_the_thick_edge_twice_the_deviation(turn_deg):
    """(n - 1) a each way for a thin prism (text-book formula); 744.2" for 0.2 deg, n 1.5168, by
    the ray trace of the design."""
    w = np.array(GlassWedge(720.0, 1.5168).through(turn_deg, (0.0, 0.0)))
    towards = np.array([math.cos(math.radians(turn_deg)), math.sin(math.radians(turn_deg))])
    beam_arcsec = math.degrees(math.atan(np.linalg.norm(w))) * 3600
    assert beam_arcsec == pytest.approx(744.2, abs=0.05)
    assert w / np.linalg.norm(w) == pytest.approx(towards, abs=1e-12)


def test_two_returns_part_by_the_index_times_the_angle():
    """2 n a between the beams (thin prism): the rear return of 10", n 1.5, is 30" from the front
    one, and reads 15" as a mirror whose right edge is farther."""
    front, rear = GlassWedge(10.0, 1.5).returns(0.0)
    assert math.degrees(rear[0] - front[0]) * 3600 == pytest.approx(30.0, abs=1e-5)
    x, y = tilt_of_slopes(*rear)
    assert (x, y) == pytest.approx((-15.0, 0.0), abs=1e-5)


def test_the_front_face_is_a_mirror():
    front, _ = GlassWedge(100.0, 1.5, (40.0, -25.0)).returns(77.0)
    assert front == pytest.approx(slopes_of_tilt(40.0, -25.0), abs=1e-15)
