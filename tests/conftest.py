"""Settings of every test: generated examples are the same each time, on every machine."""

from __future__ import annotations

import hypothesis

hypothesis.settings.register_profile(
    "repeatable", derandomize=True, database=None, deadline=None, print_blob=True
)
hypothesis.settings.load_profile("repeatable")


def pytest_report_header() -> str:
    return "seeds: each test names its own; hypothesis draws from a hash of the test, not by chance"
