"""The simulator as a source: paced, deterministic, true, closed when closed. No waiting here."""

from __future__ import annotations

import numpy as np
import pytest

from readout.capture.simulated import SimulatedSource
from readout.errors import BadInput, SourceLost, SourceStalled
from readout.simulation import Autocollimator, expose

SMALL = Autocollimator(width_px=120, height_px=90)
START_NS, UTC_NS = 5_000_000_000, 1_800_000_000_000_000_000


class Hand:
    """A clock moved by hand and by sleeping."""

    def __init__(self) -> None:
        self.now_ns = START_NS
        self.slept_s: list[float] = []

    def clock(self) -> int:
        return self.now_ns

    def utc(self) -> int:
        return UTC_NS + self.now_ns - START_NS

    def sleep(self, seconds: float) -> None:
        self.slept_s.append(seconds)
        self.now_ns += round(seconds * 1e9)


def source(hand: Hand, seed: int = 0, **more: object) -> SimulatedSource:
    return SimulatedSource(
        seed,
        **{"autocollimator": SMALL, **more},
        clock=hand.clock,
        utc=hand.utc,
        sleep=hand.sleep,
    )


def test_frames_come_at_their_rate_with_both_clocks() -> None:
    hand = Hand()
    with source(hand, frames_per_s=25.0) as simulated:
        assert simulated.live
        frames = [simulated.read(1.0) for _ in range(5)]
    assert [frame.seq for frame in frames] == [0, 1, 2, 3, 4]
    assert [(frame.t_mono_ns - START_NS) / 1e9 for frame in frames] == pytest.approx(
        [0.0, 0.04, 0.08, 0.12, 0.16], abs=1e-8
    )
    assert all(f.t_utc_ns - UTC_NS == f.t_mono_ns - START_NS for f in frames)
    assert all(f.pixels.shape == (90, 120) and f.pixels.dtype == np.uint8 for f in frames)
    assert all(f.full_scale == 255 and not f.quality for f in frames)
    assert len(hand.slept_s) == 4


def test_by_default_a_picture_of_640_by_480_with_8_bits() -> None:
    hand = Hand()
    with SimulatedSource(clock=hand.clock, utc=hand.utc, sleep=hand.sleep) as simulated:
        frame = simulated.read(1.0)
    assert frame.pixels.shape == (480, 640)
    assert frame.pixels.dtype == np.uint8


def test_no_frame_in_time_is_a_stall_and_the_frame_comes_later() -> None:
    hand = Hand()
    with source(hand, frames_per_s=2.0) as simulated:
        simulated.read(1.0)
        with pytest.raises(SourceStalled):
            simulated.read(0.2)
        assert hand.slept_s == [0.2]
        assert simulated.read(0.4).seq == 1
        assert hand.now_ns - START_NS == pytest.approx(5e8, abs=10)


def test_a_late_reader_gets_the_newest_frame_and_a_gap_for_the_others() -> None:
    hand = Hand()
    with source(hand, frames_per_s=10.0) as simulated:
        simulated.read(1.0)
        hand.now_ns += 1_050_000_000
        frame = simulated.read(0.0)
        assert simulated.truth is not None
        assert simulated.truth.t_s == pytest.approx(1.0)
        assert frame.seq == 10
        assert simulated.read(1.0).seq == 11
        assert simulated.truth.t_s == pytest.approx(1.1)


def read_some(seed: int, pause_ns: int = 0) -> list[np.ndarray]:
    hand = Hand()
    with source(hand, seed) as simulated:
        frames = []
        for _ in range(3):
            frames.append(simulated.read(1.0).pixels)
            hand.now_ns += pause_ns
        return frames


def test_the_same_seed_gives_the_same_frames_whenever_they_are_fetched() -> None:
    first, slower, other = read_some(3), read_some(3, pause_ns=20_000_000), read_some(4)
    for a, b, c in zip(first, slower, other, strict=True):
        np.testing.assert_array_equal(a, b)
        assert np.count_nonzero(a != c) > 1000
    assert np.count_nonzero(first[0] != first[1]) > 1000


def test_opened_again_it_begins_again() -> None:
    hand = Hand()
    simulated = source(hand)
    with simulated:
        first = simulated.read(1.0)
        simulated.read(1.0)
    with simulated:
        again = simulated.read(1.0)
    np.testing.assert_array_equal(first.pixels, again.pixels)
    assert again.seq == 0


def test_truth_is_where_the_picture_s_crossing_lies() -> None:
    """Each pixel within six sd of a drawing at the true place, by the exact path's own noise."""
    hand = Hand()
    with source(hand, seed=9) as simulated:
        for _ in range(5):
            frame, truth = simulated.read(1.0), simulated.truth
            assert truth is not None
            electrons = SMALL.electrons(truth.x_px, truth.y_px)
            sd = np.sqrt(SMALL.sensor.noise_var_levels2(electrons) + 1 / 12)
            pull = (frame.pixels - SMALL.sensor.mean_levels(electrons)) / sd
            assert np.abs(pull).max() < 6
            assert pull.std() == pytest.approx(1, abs=4 / np.sqrt(2 * pull.size))
            tilt = simulated.calibration.tilt(truth.x_px, truth.y_px)
            assert tilt == pytest.approx((truth.x_arcsec, truth.y_arcsec), abs=1e-9)
            moved = expose(SMALL.electrons(truth.x_px + 0.3, truth.y_px), SMALL.sensor, rng())
            off = (moved - SMALL.sensor.mean_levels(electrons)) / sd
            assert off.std() > 1.1  # the check would see a third of a pixel


def rng() -> np.random.Generator:
    return np.random.default_rng(20261203)


def test_closed_it_is_lost() -> None:
    simulated = source(Hand())
    with pytest.raises(SourceLost, match="open it again"):
        simulated.read(0.1)
    with simulated:
        simulated.read(0.1)
    with pytest.raises(SourceLost):
        simulated.read(0.1)


@pytest.mark.parametrize("frames_per_s", [0.0, -1.0, float("nan"), 1e9])
def test_an_impossible_rate_is_refused(frames_per_s: float) -> None:
    with pytest.raises(BadInput, match="frames a second"):
        SimulatedSource(frames_per_s=frames_per_s)
