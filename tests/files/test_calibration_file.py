"""A calibration survives its file exactly; anything else is refused in one line."""

from __future__ import annotations

import json
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from readout.angle import Calibration, Mounting, nominal_calibration
from readout.errors import BadInput
from readout.files.calibration_file import load_calibration, save_calibration
from readout.model import Target
from tests.contracts import one_line


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
        matrix=((1e-6 + a * a * 1e-7, b * 1e-7), (-b * 1e-7, 1e-6 + c * c * 1e-7)),
        p0_px=p0,
        k1=k1,
        signs="proven",
        target=Target.CROSSHAIR,
        pitch_um=None,
        residuals=({"file": "a.png", "x_arcsec": 0.01},),
        residual_rms_arcsec=0.01,
        n=15,
        signs_shown=({"how": "top edge pressed", "done_utc": "2026-05-04T10:00:00Z"},),
    )
    path = tmp_path_factory.mktemp("calibration") / "c.json"
    save_calibration(path, calibration)
    assert load_calibration(path) == calibration


def test_a_file_from_before_signs_were_kept_with_how_and_when(tmp_path: Path) -> None:
    path = tmp_path / "c.json"
    edited(path, signs_shown=...)
    assert load_calibration(path).signs_shown == ()


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
    with pytest.raises(BadInput, match="a number is infinite or none at all"):
        load_calibration(path)


def test_saving_where_nothing_can_be_written(tmp_path: Path) -> None:
    (tmp_path / "file").write_text("in the way", "utf-8")
    with pytest.raises(BadInput, match="cannot write"):
        save_calibration(tmp_path / "file" / "c.json", some_calibration())


NESTED = "[" * 100_000


def covariance(**changes: float) -> list[list[float]]:
    """Seven independent parameters of variance 1; ``cov_ij`` puts another number in its place."""
    cov = np.eye(7)
    for name, value in changes.items():
        i, j = (int(digit) for digit in name.removeprefix("cov_"))
        cov[i, j] = value
    return cov.tolist()


@pytest.mark.parametrize(
    ("changes", "words"),
    [
        ({"parameter_cov": covariance(cov_00=-1e-12)}, "a variance is negative"),
        ({"parameter_cov": covariance(cov_66=1e300)}, "beyond all measure"),
        ({"parameter_cov": covariance(cov_01=1.5, cov_10=1.5)}, "larger than its variances allow"),
        ({"parameter_cov": covariance(cov_00=0.0, cov_01=0.5, cov_10=0.5)}, "larger than its"),
        ({"parameter_cov": covariance(cov_01=0.5)}, "not symmetric"),
        (  # correlations of -0.9 between each two of three: no three numbers can have them
            {
                "parameter_cov": covariance(
                    cov_01=-0.9, cov_10=-0.9, cov_02=-0.9, cov_20=-0.9, cov_12=-0.9, cov_21=-0.9
                )
            },
            "have a negative variance",
        ),
        ({"made_from": {"x": 10**30}}, "too large"),
        ({"warnings": ["\ud800"]}, "half a character"),
        ({"image_width_px": 10**9}, "image_width_px"),
    ],
)
def test_what_would_fail_later_is_refused_at_once(
    tmp_path: Path, changes: dict[str, object], words: str
) -> None:
    path = tmp_path / "c.json"
    edited(path, **changes)
    with pytest.raises(BadInput, match=words) as raised:
        load_calibration(path)
    one_line(raised.value)


@pytest.mark.parametrize(
    ("parameters", "words"),
    [
        ({"a_xx_per_px": 1e308, "a_yy_per_px": 1e308}, "no focal length"),
        ({"a_xx_per_px": 1e-200, "a_yy_per_px": 1e-200}, "no focal length"),
        ({"p0_x_px": 1e300}, "beyond any picture"),
        ({"k1": -1e300}, "beyond any picture"),
    ],
)
def test_parameters_no_instrument_has(
    tmp_path: Path, parameters: dict[str, float], words: str
) -> None:
    path = tmp_path / "c.json"
    save_calibration(path, some_calibration())
    document = json.loads(path.read_text("utf-8"))
    document["parameters"] |= parameters
    if "a_xx_per_px" in parameters:
        document["parameters"] |= {"a_xy_per_px": 0.0, "a_yx_per_px": 0.0}
    path.write_text(json.dumps(document), "utf-8")
    with pytest.raises(BadInput, match=words) as raised:
        load_calibration(path)
    one_line(raised.value)


def test_correlated_parameters_are_welcome(tmp_path: Path) -> None:
    """Wholly correlated ones, and some without any variance: each covariance there can be."""
    rng = np.random.default_rng(3)
    factor = rng.normal(size=(7, 2)) * np.array([1e-9, 1e-9, 1e-9, 1e-9, 10.0, 0.0, 0.1])[:, None]
    path = tmp_path / "c.json"
    edited(path, parameter_cov=(factor @ factor.T).tolist())
    assert np.isfinite(load_calibration(path).focal_length_px_sd)


@pytest.mark.parametrize("text", [NESTED, '{"schema": ' + NESTED])
def test_nesting_without_end_is_refused(tmp_path: Path, text: str) -> None:
    path = tmp_path / "c.json"
    path.write_text(text, "utf-8")
    with pytest.raises(BadInput, match="nested") as raised:
        load_calibration(path)
    one_line(raised.value)
