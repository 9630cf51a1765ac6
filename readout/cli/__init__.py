"""The commands: thin, each importing what it needs, so that help comes at once."""

from readout.cli.app import main

__all__ = ["main"]
