"""Frames from cameras, streams, videos, folders and the simulator, behind one interface."""
