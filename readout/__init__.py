"""readout: the electronic readout of an autocollimator."""

__version__ = "0.1.0"
