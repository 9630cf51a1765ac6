"""The width to focus by: exact under blur, steady for every line, and what is said of it."""

import json
import math
from dataclasses import replace

import numpy as np
import pytest

from readout.angle.focus import (
    FocusSample,
    FocusTrace,
    focus_sample,
    forget_best,
    line_spread_px,
)
from readout.model import Arm, Quality, no_sighting
from readout.sighting import locate
from tests.sighting.frames import BRIGHT, frame


def seen(line_px, blur_px, seed):
    rng = np.random.default_rng(seed)
    crosshair = replace(BRIGHT, line_px=line_px, blur_px=blur_px, rotation_deg=0.7)
    pixels = frame((200, 200), 90 + rng.random(), 105 + rng.random(), crosshair, rng=rng)
    return locate(pixels, full_scale=255)


@pytest.mark.parametrize("line_px", [1.0, 3.0, 6.0, 12.0])
@pytest.mark.parametrize("blur_px", [0.8, 1.3, 3.0])
def test_the_spread_is_that_of_the_light(line_px, blur_px):
    """Against the simulator's line and blur: a bar of width w has the variance w^2 / 12."""
    sighting = seen(line_px, blur_px, 1)
    true = math.sqrt(blur_px**2 + line_px**2 / 12)
    for arm in (sighting.upright, sighting.level):
        assert line_spread_px(arm) == pytest.approx(true, rel=0.01)


def test_it_tells_focus_where_the_full_width_at_half_maximum_does_not():
    """A line of 12 px blurred by 0.8 and by 1.3 px: alike in width, not in spread."""
    sharp, soft = seen(12.0, 0.8, 2).upright, seen(12.0, 1.3, 3).upright
    assert soft.width_px == pytest.approx(sharp.width_px, abs=0.02)
    assert line_spread_px(soft) - line_spread_px(sharp) == pytest.approx(
        math.sqrt(12 + 1.69) - math.sqrt(12 + 0.64), abs=0.01
    )


def test_an_arm_with_a_width_alone():
    """For a Gaussian the width is 2.3548 standard deviations."""
    arm = Arm(angle_deg=0, width_px=2.3548, contrast=1, background=0)
    assert line_spread_px(arm) == pytest.approx(1.0, abs=1e-4)
    assert math.isnan(line_spread_px(None))


def test_one_number_for_both_arms():
    assert FocusSample(3.0, 4.0).spread_px == pytest.approx(math.sqrt(12.5))
    assert FocusSample(3.0, math.nan).spread_px == 3.0
    assert math.isnan(focus_sample(no_sighting(Quality.NO_IMAGE)).spread_px)


def turned(spreads, positions=None):
    trace = FocusTrace()
    for number, spread in enumerate(spreads):
        trace = trace.add(FocusSample(spread, spread, positions[number] if positions else None))
    return trace


def test_going_towards_the_best_and_past_it():
    assert turned([5.0, 4.0, 3.0]).words() == "3.00 px, the best so far: go on"
    past = turned([5.0, 4.0, 3.0, 2.0, 2.5], [0.1, 0.2, 0.3, 0.4, 0.5])
    assert past.past_best
    assert past.words() == "2.50 px now, 2.00 px was the best at 0.40 mm: turn back"
    far = turned([5, 4, 3, 2, 1.5, 1.3, 1.2, 1.3, 1.5, 2, 3])
    assert far.past_best  # a screw turned in large steps is no noise
    back = past.add(FocusSample(2.01, 2.01))
    assert not back.past_best
    assert back.words().startswith("2.01 px, as good as the best so far (2.00 px at 0.40 mm")


def test_without_a_line_it_says_what_to_do():
    assert FocusTrace().words() == "no picture yet"
    assert turned([3.0, math.nan]).words().startswith("no line in view: turn until")
    assert not turned([3.0, math.nan]).past_best


def test_noise_alone_is_not_past_the_best():
    """3000 samples of one width: the best of them is lucky, and still nothing is said."""
    rng = np.random.default_rng(4)
    trace, called = FocusTrace(), 0
    for spread in 2.0 + 0.01 * rng.standard_normal(3000):
        trace = trace.add(FocusSample(spread, spread))
        called += trace.past_best
    assert trace.sd_px == pytest.approx(0.01, rel=0.5)  # the median of 58 bends
    # The best lies some 3.4 sd low. Eight above it, even if the sd is taken for 0.6 of itself,
    # leaves 1.4 sd: rare, and never at the true sd.
    assert called / 3000 < 0.02
    assert trace.add(FocusSample(2.2, 2.2)).past_best


def test_both_arms_come_before_one():
    one = FocusSample(1.0, math.nan)
    both = FocusSample(2.0, 2.0)
    assert FocusTrace().add(one).add(both).best is both
    assert FocusTrace().add(both).add(one).best is both


def test_a_trace_is_started_anew_from_what_is_seen_now():
    trace = forget_best(turned([2.0, 5.0]))
    assert trace.best == trace.now
    assert len(trace.samples) == 1
    assert forget_best(FocusTrace()) == FocusTrace()


def test_the_trace_as_json():
    document = json.loads(json.dumps(turned([3.0, math.nan, 2.0]).document(), allow_nan=False))
    assert document["spread_px"] == [3.0, None, 2.0]
    assert document["position_mm"] == [None, None, None]
    assert document["best_px"] == 2.0
