"""A calibration survives its file exactly; anything else is refused in one line."""

from __future__ import annotations

import json
from dataclasses import replace
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from readout.angle import Calibration, Mounting, nominal_calibration
from readout.errors import BadInput
from readout.files.calibration_file import load_calibration, save_calibration
from readout.model import Target


def some_calibration(**changes: object) -> Calibration:
    nominal = nominal_calibration(
        focal_length_mm=290.0,
        pitch_um=3.45,
        image_width_px=1280,
        image_height_px=720,
        mounting=Mounting.SWAPPED_SIDES,
        rotation_deg=1.7,
        created_utc="2026-12-01T09:00:00.000Z",
    )
    return replace(nominal, **changes)


def edited(path: Path, **changes: object) -> None:
    save_calibration(path, some_calibration())
    document = json.loads(path.read_text("utf-8"))
    for key, value in changes.items():
        if value is ...:
            del document[key]
        else:
            document[key] = value
    path.write_text(json.dumps(document), "utf-8")


finite = st.floats(-1e3, 1e3)


@given(a=finite, b=finite, c=finite, p0=st.tuples(finite, finite), k1=finite)
def test_every_number_comes_back_bit_for_bit(
    tmp_path_factory: pytest.TempPathFactory,
    a: float,
    b: float,
    c: float,
    p0: tuple[float, float],
    k1: float,
) -> None:
    calibration = some_calibration(
        matrix=((1.0 + a * a, b), (-b, 1.0 + c * c)),
        p0_px=p0,
        k1=k1,
        signs="proven",
        target=Target.CROSSHAIR,
        pitch_um=None,
        residuals=({"file": "a.png", "x_arcsec": 0.01},),
        residual_rms_arcsec=0.01,
        n=15,
    )
    path = tmp_path_factory.mktemp("calibration") / "c.json"
    save_calibration(path, calibration)
    assert load_calibration(path) == calibration


def test_what_a_person_reads_in_it(tmp_path: Path) -> None:
    path = tmp_path / "c.json"
    save_calibration(path, some_calibration())
    document = json.loads(path.read_text("utf-8"))
    assert document["schema"] == "readout.calibration/1"
    # focal length over pitch; tilt per pixel = pitch / (2 f) * 206264.806 (design, "Calibration")
    assert document["focal_length_px"] == pytest.approx(290.0 / 3.45e-3, rel=1e-12)
    assert document["focal_length_mm"] == pytest.approx(290.0, rel=1e-12)
    scale = 3.45e-3 / (2 * 290.0) * 206264.806
    assert document["scale_x_arcsec_per_px"] == pytest.approx(scale, rel=1e-8)
    assert document["mirrored"] is True


@pytest.mark.parametrize(
    ("changes", "word"),
    [
        ({"schema": "readout.calibration/9"}, "readout.calibration/9"),
        ({"schema": ...}, "schema"),
        ({"parameters": ...}, "parameters"),
        ({"image_width_px": 0}, "image_width_px"),
        ({"image_width_px": "wide"}, "image_width_px"),
        ({"target": "cat"}, "target"),
        ({"parameter_cov": [[0.0] * 7] * 6}, "parameter_cov"),
        ({"signs": "perhaps"}, "signs"),
    ],
)
def test_what_cannot_be_used_is_named_in_one_line(
    tmp_path: Path, changes: dict[str, object], word: str
) -> None:
    path = tmp_path / "c.json"
    edited(path, **changes)
    with pytest.raises(BadInput) as refused:
        load_calibration(path)
    message = str(refused.value)
    assert word in message
    assert str(path) in message
    assert "\n" not in message


@pytest.mark.parametrize("content", [b"", b"{", b"\xff\xfe", b"[]", b"3", b'{"schema": NaN}'])
def test_no_json_or_no_calibration(tmp_path: Path, content: bytes) -> None:
    path = tmp_path / "c.json"
    path.write_bytes(content)
    with pytest.raises(BadInput) as refused:
        load_calibration(path)
    assert "\n" not in str(refused.value)


def test_missing_file(tmp_path: Path) -> None:
    with pytest.raises(BadInput, match="does not exist"):
        load_calibration(tmp_path / "none.json")


def test_a_matrix_of_rank_one_is_refused(tmp_path: Path) -> None:
    path = tmp_path / "c.json"
    edited(path)
    document = json.loads(path.read_text("utf-8"))
    for name, value in zip(("xx", "xy", "yx", "yy"), (1e-5, 2e-5, 2e-5, 4e-5), strict=True):
        document["parameters"][f"a_{name}_per_px"] = value
    path.write_text(json.dumps(document), "utf-8")
    with pytest.raises(BadInput, match="two axes"):
        load_calibration(path)


def test_an_infinite_number_is_refused(tmp_path: Path) -> None:
    path = tmp_path / "c.json"
    edited(path)
    path.write_text(path.read_text("utf-8").replace('"k1": 0.0', '"k1": Infinity'), "utf-8")
    with pytest.raises(BadInput, match="k1"):
        load_calibration(path)


def test_saving_where_nothing_can_be_written(tmp_path: Path) -> None:
    (tmp_path / "file").write_text("in the way", "utf-8")
    with pytest.raises(BadInput, match="cannot write"):
        save_calibration(tmp_path / "file" / "c.json", some_calibration())
