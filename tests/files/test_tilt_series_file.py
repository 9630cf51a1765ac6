"""Records as measure, the logging endpoint and other people write them."""

import io
from pathlib import Path

import numpy as np
import pytest

from readout.errors import BadInput
from readout.files.readings_file import ReadingsWriter
from readout.files.tilt_series_file import read_tilt_series
from readout.model import Quality
from tests.logbook.made import reading


def written(tmp_path: Path, text: str) -> Path:
    path = tmp_path / "record.csv"
    path.write_text(text, "utf-8")
    return path


def test_what_measure_writes_is_read_back(tmp_path: Path) -> None:
    out = io.StringIO()
    given = [reading(k) for k in range(5)]
    with ReadingsWriter(out) as writer:
        for one in given:
            writer.write(one)
    found = read_tilt_series(written(tmp_path, out.getvalue()))
    good = [one.quality is Quality.OK for one in given]
    assert found.flagged == good.count(False)
    for column in ("x_arcsec", "y_arcsec"):
        expected = [
            getattr(one, column) if ok else np.nan for one, ok in zip(given, good, strict=True)
        ]
        assert getattr(found, column) == pytest.approx(expected, abs=1e-6, nan_ok=True)
    assert found.t_s == pytest.approx([one.t_s - given[0].t_s for one in given], abs=1e-6)


def test_three_columns_in_any_order_are_enough(tmp_path: Path) -> None:
    found = read_tilt_series(written(tmp_path, "y_arcsec,t_s,x_arcsec\n1,10,2\n,12.5,4\n"))
    assert found.t_s.tolist() == [0.0, 2.5]
    assert found.x_arcsec.tolist() == [2.0, 4.0]
    assert found.y_arcsec == pytest.approx([1.0, np.nan], nan_ok=True)


def test_times_in_utc(tmp_path: Path) -> None:
    text = (
        "t_utc,x_arcsec,y_arcsec\n"
        "2026-12-31T23:59:59.500Z,1,1\n"
        "2027-01-01T00:00:00Z,1,1\n"
        "2027-01-01T01:00:01+01:00,1,1\n"
    )
    assert read_tilt_series(written(tmp_path, text)).t_s.tolist() == [0.0, 0.5, 1.5]


def test_a_log_over_a_restart_goes_by_utc(tmp_path: Path) -> None:
    """Seconds begin anew with the program; the header comes again with the connection."""
    header = "t_utc,t_s,x_arcsec,y_arcsec,quality\n"
    text = (
        header + "2026-12-01T09:00:00.000Z,100.0,1,1,\n" + "2026-12-01T09:00:01.000Z,101.0,1,1,\n"
    )
    found = read_tilt_series(written(tmp_path, text))
    assert found.t_s.tolist() == [0.0, 1.0]
    text += header + "2026-12-01T09:05:00.000Z,0.5,1,1,dim saturated\n"
    found = read_tilt_series(written(tmp_path, text))
    assert found.t_s.tolist() == [0.0, 1.0, 300.0]
    assert found.flagged == 1
    assert np.isnan(found.x_arcsec).tolist() == [False, False, True]


def test_it_is_told_how_many_rows_have_come(tmp_path: Path) -> None:
    rows = "".join(f"{k},0,0\n" for k in range(45_000))
    told: list[int] = []
    read_tilt_series(written(tmp_path, "t_s,x_arcsec,y_arcsec\n" + rows), told.append)
    assert told == [20_000, 40_000]


@pytest.mark.parametrize(
    ("text", "line"),
    [
        ("t_s,x_arcsec\n1,2\n", "no column y_arcsec"),
        ("x_arcsec,y_arcsec\n1,2\n", r"no column t_s \(or t_utc\)"),
        ("t_s,x_arcsec,y_arcsec\n0,1,1\n1,wide,1\n", "line 3: x_arcsec is 'wide'.* no number"),
        ("t_s,x_arcsec,y_arcsec\n0,1,nan\n", "line 2: y_arcsec is 'nan'.* no number"),
        ("t_utc,x_arcsec,y_arcsec\nnoon,1,1\n", "line 2: t_utc is 'noon'.* no time"),
    ],
)
def test_what_cannot_be_read_is_named(tmp_path: Path, text: str, line: str) -> None:
    with pytest.raises(BadInput, match=line) as refused:
        read_tilt_series(written(tmp_path, text))
    assert "\n" not in str(refused.value)
