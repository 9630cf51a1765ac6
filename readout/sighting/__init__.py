"""Where in a frame the return image lies, to a small part of a pixel, with its covariance."""

from readout.sighting.prepare import Preparation
from readout.sighting.targets import locate

__all__ = ["Preparation", "locate"]
