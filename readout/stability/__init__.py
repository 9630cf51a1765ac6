"""From a series of readings to what it shows: noise, drift, and how far either can be believed."""

from readout.stability.allan import Allan, allan_deviation
from readout.stability.even import EvenSeries, even_series
from readout.stability.floor import AxisFloor, Floor, floor_of_null_test
from readout.stability.floor_claims import Claim, Drift, claim_drift, claims
from readout.stability.floor_document import floor_document, floor_of_document

__all__ = [
    "Allan",
    "AxisFloor",
    "Claim",
    "Drift",
    "EvenSeries",
    "Floor",
    "allan_deviation",
    "claim_drift",
    "claims",
    "even_series",
    "floor_document",
    "floor_of_document",
    "floor_of_null_test",
]
