"""Rows of readings: the contract's columns, nothing invented for what is missing."""

from __future__ import annotations

import csv
import io
import json
import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from readout.files.readings_file import ReadingsWriter
from readout.model import Quality, Reading
from readout.rows import reading_row, rounded
from readout.utc import utc_text

COLUMNS = [
    "t_s",
    *("x_arcsec", "y_arcsec", "x_sd_arcsec", "y_sd_arcsec", "x_u_arcsec", "y_u_arcsec"),
    "quality",
    *("x_px", "y_px"),
    "signs",
]


def some_reading(
    value: float = 1.25, quality: Quality = Quality.OK, name: str | None = None
) -> Reading:
    return Reading(
        0,
        0.5,
        1_000_000_000,
        *[value] * 10,
        quality=quality,
        calibration_id="c",
        name=name,
        signs="unproven",
    )


@given(st.floats(allow_nan=True, allow_infinity=True))
def test_a_row_is_json_without_nan_and_keeps_the_number(value: float) -> None:
    row = json.loads(json.dumps(reading_row(some_reading(value)), allow_nan=False))
    assert list(row) == ["t_utc", *COLUMNS]
    if math.isfinite(value):
        assert row["x_arcsec"] == pytest.approx(value, abs=5.1e-7, rel=1e-15)
    else:
        assert row["x_arcsec"] is None


@given(st.floats(-1e-6, 1e-6))
def test_no_number_is_a_negative_zero(value: float) -> None:
    for each in (value, -0.0, -1e-320):
        near = rounded(each)
        assert near is not None
        assert near != 0 or math.copysign(1.0, near) == 1.0  # IEEE 754: the sign of a zero


@given(st.floats(1e-12, 1e-3))
def test_a_small_uncertainty_keeps_four_digits(value: float) -> None:
    # half a unit of the fourth digit is at most 5e-4 of the value
    assert rounded(value) == pytest.approx(value, rel=5.1e-4)


def test_csv_of_named_frames() -> None:
    text = io.StringIO()
    with ReadingsWriter(text) as writer:
        writer.write(some_reading(name="a.png"))
        writer.write(some_reading(math.nan, Quality.NO_IMAGE | Quality.DIM, name="b, c.png"))
        assert len(text.getvalue().splitlines()) == 3  # each row is out before the next one
    rows = list(csv.DictReader(io.StringIO(text.getvalue())))
    assert list(rows[0]) == ["file", *COLUMNS]
    assert rows[0]["x_arcsec"] == "1.25"
    assert rows[0]["quality"] == ""
    assert [row["signs"] for row in rows] == ["unproven"] * 2
    assert rows[1]["file"] == "b, c.png"
    assert rows[1]["x_arcsec"] == rows[1]["y_u_arcsec"] == ""
    assert rows[1]["quality"] == "no_image dim"


def test_csv_without_a_reading_still_has_its_header() -> None:
    text = io.StringIO()
    with ReadingsWriter(text):
        pass
    assert text.getvalue() == "t_utc," + ",".join(COLUMNS) + "\n"


def test_utc_text_against_known_instants() -> None:
    # POSIX time 0, and 1234567890 = 2009-02-13T23:31:30Z (a well-known instant, from memory)
    assert utc_text(0) == "1970-01-01T00:00:00.000Z"
    assert utc_text(1_234_567_890_123_999_999) == "2009-02-13T23:31:30.123Z"
