"""Mirror motion, optics and sensor: frames whose truth is known."""

from readout.simulation.autocollimator import Autocollimator
from readout.simulation.crosshair import Crosshair, crosshair_image
from readout.simulation.motion import Motion
from readout.simulation.sensor import Sensor, expose

__all__ = ["Autocollimator", "Crosshair", "Motion", "Sensor", "crosshair_image", "expose"]
