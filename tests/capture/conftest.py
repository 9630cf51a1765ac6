"""Fixtures of the capture tests."""

from __future__ import annotations

import socket

import pytest


@pytest.fixture
def unused_tcp_port() -> int:
    """A port of loopback nobody listens on just now."""
    with socket.socket() as probe:
        probe.bind(("127.0.0.1", 0))
        return int(probe.getsockname()[1])
