"""Mirror motion, optics and sensor: frames whose truth is known."""

from readout.simulation.autocollimator import Autocollimator
from readout.simulation.bound import crossing_bound_cov
from readout.simulation.crosshair import Crosshair, crosshair_image
from readout.simulation.frames import SimulatedFrames, Truth, simulate_frames, truth_at
from readout.simulation.live import LiveRenderer
from readout.simulation.motion import Motion
from readout.simulation.sensor import NoiseBank, Sensor, expose

__all__ = [
    "Autocollimator",
    "Crosshair",
    "LiveRenderer",
    "Motion",
    "NoiseBank",
    "Sensor",
    "SimulatedFrames",
    "Truth",
    "crosshair_image",
    "crossing_bound_cov",
    "expose",
    "simulate_frames",
    "truth_at",
]
