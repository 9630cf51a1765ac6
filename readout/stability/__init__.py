"""From a series of readings to what it shows: noise, drift, and how far either can be believed."""

from readout.stability.allan import Allan, allan_deviation
from readout.stability.drift import AxisDrift, RecordDrift, drift_of
from readout.stability.drift_document import drift_document
from readout.stability.even import EvenSeries, even_series
from readout.stability.floor import AxisFloor, Floor, floor_of_null_test
from readout.stability.floor_claims import Claim, Drift, claim_drift, claims
from readout.stability.floor_document import floor_document, floor_of_document
from readout.stability.tilt_series import TiltSeries

__all__ = [
    "Allan",
    "AxisDrift",
    "AxisFloor",
    "Claim",
    "Drift",
    "EvenSeries",
    "Floor",
    "RecordDrift",
    "TiltSeries",
    "allan_deviation",
    "claim_drift",
    "claims",
    "drift_document",
    "drift_of",
    "even_series",
    "floor_document",
    "floor_of_document",
    "floor_of_null_test",
]
