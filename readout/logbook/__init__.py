"""Runs and their readings, kept so that a crash takes nothing that was acknowledged."""

from readout.logbook.connection import FILE_NAME
from readout.logbook.reader import LogReader, Run
from readout.logbook.series import Series
from readout.logbook.statements import NewRun, Spread
from readout.logbook.writer import Logbook

__all__ = ["FILE_NAME", "LogReader", "Logbook", "NewRun", "Run", "Series", "Spread"]
