"""Pictures of a covered mirror and of the dark become what is known of the camera."""

import numpy as np
import pytest

from readout.errors import BadInput
from readout.files.camera_frames import knowledge_from
from readout.files.pictures import write_picture

SHAPE = (40, 60)
NOW = "2026-05-04T03:02:01.000Z"


@pytest.fixture
def frames(tmp_path):
    """Eight frames each: 40 levels of fixed light over 10 of dark, noise 2, one pixel hot."""
    rng = np.random.default_rng(3)
    for name, level in (("dark", 10), ("covered", 50)):
        (tmp_path / name).mkdir()
        for k in range(8):
            levels = rng.normal(level, 2, SHAPE)
            levels[7, 11] = 200
            write_picture(tmp_path / name / f"{k}.png", np.rint(levels).astype(np.uint8))
    return tmp_path


def test_a_folder_and_its_pictures_are_the_same(frames):
    whole = knowledge_from(fixed=[frames / "covered"], made_utc=NOW)
    one_by_one = knowledge_from(fixed=sorted((frames / "covered").iterdir()), made_utc=NOW)
    assert np.array_equal(whole.preparation.fixed, one_by_one.preparation.fixed)
    assert (whole.fixed_frames, whole.dark_frames, whole.full_scale) == (8, 0, 255)
    assert (whole.size_px, whole.made_utc) == ((60, 40), NOW)
    # the mean of 8 * 2399 good pixels, noise 2 and rounding
    assert np.median(whole.preparation.fixed) == pytest.approx(50, abs=0.2)
    assert whole.preparation.defective is None  # a bright pixel there may be fixed light


def test_the_dark_tells_the_bad_pixel(frames):
    known = knowledge_from(dark=[frames / "dark"], fixed=[frames / "covered"], made_utc=NOW)
    assert np.argwhere(known.preparation.defective).tolist() == [[7, 11]]
    prepared = known.preparation.prepare(np.full(SHAPE, 90, np.uint8), 255)
    assert prepared.levels[0].mean() == pytest.approx(40, abs=1)  # the fixed frame has the dark too


def test_the_curve_is_undone_before_the_mean(frames):
    """For levels L = 255 q^0.5 the light is q = (L / 255)^2: exact but for the frames' noise, whose
    square adds its variance (4) to the mean of L^2."""
    known = knowledge_from(fixed=[frames / "covered"], gamma=0.5, made_utc=NOW)
    expected = (50**2 + 4 + 1 / 12) / 255
    assert np.median(known.preparation.fixed) == pytest.approx(expected, abs=0.15)


def test_the_depth_has_to_come_from_somewhere():
    with pytest.raises(BadInput, match="give a frame"):
        knowledge_from(gamma=0.45, made_utc=NOW)
    assert knowledge_from(gamma=0.45, full_scale=1023, made_utc=NOW).size_px is None


def test_frames_that_do_not_go_together_are_refused(frames, tmp_path):
    write_picture(tmp_path / "small.png", np.full((20, 30), 9, np.uint8))
    write_picture(tmp_path / "deep.png", np.full(SHAPE, 9, np.uint16), full_scale=1023)
    (tmp_path / "nothing").mkdir()
    covered = frames / "covered"
    for given, words in (
        ({"fixed": [covered, tmp_path / "small.png"]}, "small.png is of another size"),
        ({"fixed": [covered, tmp_path / "deep.png"]}, "deep.png is of another size or depth"),
        ({"fixed": [covered], "dark": [tmp_path / "small.png"]}, "different size"),
        ({"fixed": [tmp_path / "none.png"]}, "none.png does not exist"),
        ({"fixed": [tmp_path / "nothing"]}, "holds no picture"),
        ({"fixed": [covered], "gamma": 0.0}, "gamma"),
        ({"fixed": [covered], "saturation": 300}, "300"),
    ):
        with pytest.raises(BadInput, match=words) as refused:
            knowledge_from(made_utc=NOW, **given)
        assert "\n" not in str(refused.value)


def test_a_lit_picture_is_not_dark(tmp_path):
    """A bright line over 5 % of the picture."""
    lit = np.random.default_rng(4).normal(10, 2, SHAPE)
    lit[:, 20:23] += 90
    write_picture(tmp_path / "lit.png", np.rint(lit).astype(np.uint8))
    with pytest.raises(BadInput, match="5 % of the pixels stand out, so it is not dark"):
        knowledge_from(dark=[tmp_path / "lit.png"], made_utc=NOW)
