"""What is known of a camera, written and read back, and what is refused."""

import io
import json

import numpy as np
import pytest

from readout.errors import BadInput
from readout.files.preparation_file import CameraKnowledge, load_knowledge, save_knowledge
from readout.sighting.prepare import Preparation
from readout.sighting.raw import Colour, Mosaic, Plane
from readout.sighting.response import power_response

SHAPE = (12, 16)


def everything(full_scale=1023):
    rng = np.random.default_rng(1)
    made = Preparation(
        shift=6,
        plane=Plane(Mosaic.GRBG, Colour.BLUE),
        response=power_response(0.45, full_scale),
        dark=rng.normal(4, 1, SHAPE).astype(np.float32),
        fixed=rng.normal(40, 1, SHAPE).astype(np.float32),
        defective=rng.random(SHAPE) < 0.1,
        saturation=1000,
    )
    return CameraKnowledge(made, full_scale, "2026-05-04T03:02:01.000Z", 16, 8)


def rewritten(path, **changes):
    """The archive with some of its arrays replaced, or left out where None."""
    with np.load(path) as archive:
        arrays = {name: archive[name] for name in archive.files}
    arrays = {k: v for k, v in (arrays | changes).items() if v is not None}
    np.savez(path, **arrays)


def about(path, **changes):
    with np.load(path) as archive:
        document = json.loads(str(archive["about"])) | changes
    rewritten(path, about=np.array(json.dumps(document)))


def test_all_of_it_comes_back_bit_by_bit(tmp_path):
    path, known = tmp_path / "camera.npz", everything()
    save_knowledge(path, known)
    back = load_knowledge(path)
    for name in ("dark", "fixed", "defective"):
        ours, theirs = getattr(known.preparation, name), getattr(back.preparation, name)
        assert theirs.dtype == ours.dtype
        assert np.array_equal(theirs, ours)
    assert np.array_equal(back.preparation.response.table, known.preparation.response.table)
    for name in ("shift", "plane", "saturation"):
        assert getattr(back.preparation, name) == getattr(known.preparation, name)
    for name in ("full_scale", "made_utc", "fixed_frames", "dark_frames", "size_px"):
        assert getattr(back, name) == getattr(known, name)
    assert back.size_px == (16, 12)


def test_little_is_kept_where_little_is_known(tmp_path):
    save_knowledge(tmp_path / "c.npz", CameraKnowledge(Preparation(), 255, "now"))
    back = load_knowledge(tmp_path / "c.npz")
    assert back.preparation == Preparation()
    assert back.size_px is None
    back.refuse_unfit((640, 480), 255)  # whatever size they are


def test_pictures_of_another_kind_are_refused_in_a_line():
    known = everything()
    known.refuse_unfit((16, 12), 1023)
    for size_px, full_scale, words in (
        ((12, 16), 1023, "16 × 12 px"),
        ((16, 12), 255, "up to 1023"),
    ):
        with pytest.raises(BadInput, match=words) as refused:
            known.refuse_unfit(size_px, full_scale)
        assert "\n" not in str(refused.value)


def test_files_that_are_none_are_refused_by_name(tmp_path):
    good = tmp_path / "good.npz"
    save_knowledge(good, everything())
    alone = io.BytesIO()
    np.save(alone, np.zeros(3))
    whole = good.read_bytes()
    pickled = io.BytesIO()
    np.savez(pickled, about=np.array([{"a": 1}], dtype=object))
    for name, data in {
        "text": b"no archive",
        "empty": b"",
        "cut": whole[: len(whole) // 2],
        "array": alone.getvalue(),
        "pickled": pickled.getvalue(),
    }.items():
        path = tmp_path / f"{name}.npz"
        path.write_bytes(data)
        with pytest.raises(BadInput, match=name) as refused:
            load_knowledge(path)
        assert "\n" not in str(refused.value)
    with pytest.raises(BadInput, match="does not exist"):
        load_knowledge(tmp_path / "none.npz")
    with pytest.raises(BadInput, match="cannot read"):
        load_knowledge(tmp_path)


@pytest.mark.parametrize(
    ("changes", "word"),
    [
        ({"schema": "readout.preparation/9"}, "schema"),
        ({"full_scale": 0}, "full_scale"),
        ({"mosaic": "RGBW"}, "mosaic"),
        ({"shift": -1}, "shift"),
        ({"saturation": 2000}, "saturation"),
        ({"full_scale": 4095}, "response"),
        ({"made_utc": 5}, "made_utc"),
    ],
)
def test_what_cannot_be_is_refused(tmp_path, changes, word):
    path = tmp_path / "camera.npz"
    save_knowledge(path, everything())
    about(path, **changes)
    with pytest.raises(BadInput, match=word):
        load_knowledge(path)


@pytest.mark.parametrize(
    ("changes", "word"),
    [
        ({"fixed": np.zeros((3, 4), np.float32)}, "different sizes"),
        ({"fixed": np.zeros(SHAPE, np.float64)}, "fixed is no picture"),
        ({"dark": np.zeros((2, 3, 4), np.float32)}, "dark is no picture"),
        ({"dark": np.full(SHAPE, np.nan, np.float32)}, "no number"),
        ({"response": np.zeros(7, np.float32)}, "response"),
        ({"response": np.arange(1024, 0, -1).astype(np.float32)}, "response"),
        ({"about": None}, "no file of what is known"),
    ],
)
def test_arrays_that_do_not_fit_are_refused(tmp_path, changes, word):
    path = tmp_path / "camera.npz"
    save_knowledge(path, everything())
    rewritten(path, **changes)
    with pytest.raises(BadInput, match=word):
        load_knowledge(path)
