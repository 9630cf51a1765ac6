"""The instrument without a network: a source, a sighting, a calibration, a zero, an average."""

from readout.instrument.acquisition import State
from readout.instrument.averaging import Average, Statistic
from readout.instrument.instrument import Instrument
from readout.instrument.scale import Optics
from readout.instrument.values import Event, Status
from readout.instrument.zero import Reference, Zero

__all__ = [
    "Average",
    "Event",
    "Instrument",
    "Optics",
    "Reference",
    "State",
    "Statistic",
    "Status",
    "Zero",
]
