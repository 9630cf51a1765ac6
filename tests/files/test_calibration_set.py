"""Reading a calibration set: what it says, and each refusal in one line."""

import math

import pytest

from readout.errors import BadInput
from readout.files.calibration_set import read_calibration_set

TILTS = "file,x_arcsec,y_arcsec,sd_arcsec\na.png,1.5,,0.02\nb.png,-3,4,0.02\n"
MARKS = '[graduation]\nfile = "a.png"\n'
LEVER = "file,lever_mm,height_mm,height_sd_mm,axis\n"


def write(folder, tilts=TILTS, about=None):
    (folder / "tilts.csv").write_text(tilts, encoding="utf-8")
    if about is not None:
        (folder / "set.toml").write_text(about, encoding="utf-8")
    for name in ("a.png", "b.png"):
        (folder / name).touch()
    return folder


def test_tilts_with_an_empty_axis(tmp_path):
    found = read_calibration_set(write(tmp_path))
    first, second = found.tilts
    assert (first.file, first.x_arcsec, first.sd_arcsec) == ("a.png", 1.5, 0.02)
    assert math.isnan(first.y_arcsec)
    assert (second.x_arcsec, second.y_arcsec) == (-3.0, 4.0)
    assert found.scale_rel_sd == 0.0
    assert found.pitch_um is None


def test_what_set_toml_says(tmp_path):
    about = """
    note = "on the slab"
    [camera]
    pixel_um = 3.45
    mounting = "half_turn"
    [optics]
    focal_length_mm = 300
    [stage]
    scale_rel_sd = 2e-4
    """
    found = read_calibration_set(write(tmp_path, about=about))
    assert (found.pitch_um, found.mounting.value) == (3.45, "half_turn")
    assert (found.nominal_focal_length_mm, found.scale_rel_sd) == (300.0, 2e-4)
    assert found.note == "on the slab"


def test_a_lever_raised_by_gauge_blocks(tmp_path):
    """Sine of the angle = height / lever (the sine bar of the workshop); 1 mm on 500 mm and its
    uncertainty of 1 um: 412.5303" +- 0.4125", by hand from arcsin 0.002. The block lies under
    either end in turn, so its error is one, and opposite."""
    rows = LEVER + "a.png,500,1,0.001,y\nb.png,500,-1,0.001,y\n"
    found = read_calibration_set(write(tmp_path, rows, "[stage]\nlever_sd_mm = 0.5\n"))
    up, down = found.tilts
    assert up.y_arcsec == pytest.approx(math.degrees(math.asin(0.002)) * 3600)
    assert up.y_arcsec == pytest.approx(412.5299, abs=5e-4)
    assert down.y_arcsec == -up.y_arcsec
    assert up.sd_arcsec == down.sd_arcsec == 0.0
    assert math.isnan(up.x_arcsec)
    length, block = found.shared
    assert length.tilt_arcsec[:, 1] == pytest.approx([-0.41253, 0.41253], abs=1e-5)
    assert block.tilt_arcsec[:, 1] == pytest.approx([0.41253, -0.41253], abs=1e-5)
    assert not length.tilt_arcsec[:, 0].any()


def test_a_horizontal_lever_is_a_tangent(tmp_path):
    rows = LEVER + "a.png,100,10,0.001,x\nb.png,100,0,0.001,x\n"
    found = read_calibration_set(write(tmp_path, rows, 'lever_is = "horizontal"\n'))
    assert found.tilts[0].x_arcsec == pytest.approx(math.degrees(math.atan(0.1)) * 3600)


@pytest.mark.parametrize(
    ("tilts", "words"),
    [
        ("", "columns of none"),
        ("file,x,y,sd\n", "columns file,x,y,sd"),
        ("file,x_arcsec,y_arcsec,sd_arcsec\n", "no tilts"),
        (TILTS.replace("-3", "minus three"), "line 3: x_arcsec is 'minus three', not a number"),
        (TILTS.replace("-3", "nan"), "leave it empty"),
        (TILTS.replace("-3,4", ","), "line 3: neither"),
        (TILTS.replace("4,0.02", "4,"), "line 3: sd_arcsec must be 0 or more, it is empty"),
        (TILTS.replace("b.png", "c.png"), "names c.png, which is not in the folder"),
        (TILTS.replace("b.png", "a.png"), "named twice"),
        (TILTS.replace("b.png", "../b.png"), "no file of this folder"),
        (LEVER + "a.png,10,20,0.001,x\n", "cannot be raised"),
        (LEVER + "a.png,100,1,0.001,z\n", "axis is z"),
        (LEVER + "a.png,100,,0.001,x\n", "height_mm is empty"),
    ],
)
def test_each_refusal_names_row_and_remedy(tmp_path, tilts, words):
    with pytest.raises(BadInput, match=words) as refusal:
        read_calibration_set(write(tmp_path, tilts))
    assert "\n" not in str(refusal.value)


@pytest.mark.parametrize(
    ("about", "words"),
    [
        ("[camera]\npixel_um = -1\n", "camera.pixel_um"),
        ("[camera]\npixle_um = 1\n", "camera.pixle_um"),
        ("target = 'moon'\n", "target"),
        ("this is no toml", "mend it"),
        (MARKS + "spacing_arcsec = 10\n", 'may mean two things: say marked_as = "mirror_tilt"'),
        (MARKS + "spacing_um = 100\n", "needs the focal_length_mm"),
        (MARKS + 'spacing_arcsec = 10\nmarked_as = "both"\n', "graduation.marked_as"),
        (MARKS, "what a division of the scale means is not said"),
    ],
)
def test_what_set_toml_may_not_say(tmp_path, about, words):
    with pytest.raises(BadInput, match=words):
        read_calibration_set(write(tmp_path, about=about))


def test_missing_things(tmp_path):
    with pytest.raises(BadInput, match="is no folder"):
        read_calibration_set(tmp_path / "nowhere")
    with pytest.raises(BadInput, match=r"tilts\.csv does not exist"):
        read_calibration_set(tmp_path)


def test_a_set_toml_nested_without_end(tmp_path):
    with pytest.raises(BadInput, match="nested without end"):
        read_calibration_set(write(tmp_path, about="note = " + "[" * 100_000))


@pytest.mark.parametrize("about", ["", 'lever_is = "horizontal"\n'])
def test_the_uncertainty_of_a_steep_lever_by_differences(tmp_path, about):
    """What a height off by its standard uncertainty does to the angle, by the set's own angles.

    At 6 of 10 the slope is 1 / sqrt(1 - 0.36) = 1.25 for the sine and 1 / 1.36 for the tangent.
    """
    sd_mm = 1e-4
    rows = "".join(
        f"{name}.png,10,{6 + step * sd_mm:.4f},{sd_mm},x\n" for name, step in (("a", -1), ("b", 1))
    )
    low, high = read_calibration_set(write(tmp_path, LEVER + rows, about)).tilts
    slope = 1 / 1.36 if about else 1.25
    difference_arcsec = (high.x_arcsec - low.x_arcsec) / 2
    assert high.sd_arcsec == pytest.approx(difference_arcsec, rel=1e-4)
    assert high.sd_arcsec == pytest.approx(slope * sd_mm / 10 * 206264.806, rel=1e-4)


def test_levers_of_several_lengths_share_one_error_in_millimetres(tmp_path):
    rows = LEVER + "a.png,500,1,0.001,x\nb.png,250,1,0.002,x\n"
    found = read_calibration_set(write(tmp_path, rows, "[stage]\nlever_sd_mm = 0.5\n"))
    (length,) = found.shared  # blocks of unlike uncertainty are two blocks
    for tilt, change, share in zip(
        found.tilts, length.tilt_arcsec[:, 0], (0.5 / 500, 0.5 / 250), strict=True
    ):
        assert change == pytest.approx(-share * tilt.x_arcsec, rel=1e-4)


TURNS = "file,turn_deg,turn_sd_deg\na.png,,0\nb.png,90,0.5\n"


def test_a_wedge_in_transmission(tmp_path):
    """0.2 deg of glass of 1.5168 read 372.1" (ray trace of the design); up is towards the thick
    edge, so that the reading goes down."""
    about = """
    [wedge]
    used = "in_transmission"
    angle_arcsec = 720
    angle_sd_arcsec = 0.5
    index = 1.5168
    index_sd = 0.0002
    mark_sd_deg = 1
    """
    found = read_calibration_set(write(tmp_path, TURNS, about))
    out, up = found.tilts
    assert (out.x_arcsec, out.y_arcsec, out.across_sd_arcsec) == (0.0, 0.0, 0.0)
    assert (up.x_arcsec, up.y_arcsec) == pytest.approx((0.0, -372.1), abs=0.05)
    assert up.across_sd_arcsec == pytest.approx(372.1 * math.radians(0.5), rel=1e-3)
    worth, mark = found.shared
    # (n - 1) u(a) and a u(n), small angles
    assert -worth.tilt_arcsec[1, 1] == pytest.approx(math.hypot(0.5168 * 0.5, 720 * 2e-4), rel=1e-3)
    assert mark.tilt_arcsec[1] == pytest.approx([372.1 * math.radians(1), 0], rel=1e-3)
    assert found.way == "wedge in transmission"


def test_two_returns_of_a_window_make_two_rows(tmp_path):
    about = '[wedge]\nused = "two_returns"\nreading_arcsec = 120\nreading_sd_arcsec = 0.1\n'
    rows = "file,turn_deg,turn_sd_deg\na.png,0,1\nb.png,180,1\n"
    planned = read_calibration_set(write(tmp_path, rows, about)).planned()
    assert planned.names == ("a.png (front)", "a.png (rear)", "b.png (front)", "b.png (rear)")
    assert planned.tilt_arcsec[:, 0] == pytest.approx([0, -120, 0, 120])
    assert planned.zeros.tolist() == [0, 0, 1, 1]
    (worth,) = planned.shared
    assert worth.tilt_arcsec[:, 0] == pytest.approx([0, -0.1, 0, 0.1])


@pytest.mark.parametrize(
    ("tilts", "about", "words"),
    [
        (TURNS, "", "no .wedge."),
        (TILTS, '[wedge]\nused = "two_returns"\nreading_arcsec = 1\n', "other ways neither"),
        (TURNS, '[wedge]\nused = "two_returns"\nreading_arcsec = 1\n', "line 2: turn_deg is empty"),
        (TURNS, '[wedge]\nused = "two_returns"\n', "give either reading_arcsec, or"),
        (TURNS, '[wedge]\nused = "in_transmission"\nangle_arcsec = 9\nindex = 0.5\n', "index of"),
        (TILTS, '[[nudge]]\nedge = "left"\nbefore = "a.png"\nafter = "b.png"\n', "nudge.0.edge"),
        (TILTS, '[[nudge]]\nedge = "top"\nbefore = "a.png"\nafter = "c.png"\n', "names c.png"),
        (TILTS, '[axes]\nsingle_axis = "y"\nfiles = ["a.png"]\n', "axes.files"),
        (TILTS, '[fixed]\nfile = "dark.png"\n', "names dark.png"),
    ],
)
def test_what_wedges_signs_and_axes_may_not_say(tmp_path, tilts, about, words):
    with pytest.raises(BadInput, match=words) as refusal:
        read_calibration_set(write(tmp_path, tilts, about))
    assert "\n" not in str(refusal.value)


def test_a_plan_needs_no_frames(tmp_path):
    (tmp_path / "tilts.csv").write_text(LEVER + "a.png,100,0,0.001,x\nb.png,100,1,0.001,x\n")
    assert len(read_calibration_set(tmp_path, with_frames=False).tilts) == 2
    with pytest.raises(BadInput, match=r"names a\.png, which is not in the folder"):
        read_calibration_set(tmp_path)


def test_a_graduated_scale_needs_no_table(tmp_path):
    (tmp_path / "a.png").touch()
    about = MARKS + 'spacing_arcsec = 10\nmarked_as = "mirror_tilt"\n[camera]\nown_lens = true\n'
    (tmp_path / "set.toml").write_text(about)
    found = read_calibration_set(tmp_path)
    assert found.tilts == ()
    assert found.own_lens
    # a mirror's tilt turns the beam by twice as much
    assert found.graduation.division.slope == pytest.approx(2 * math.radians(10 / 3600))


def test_the_frame_with_the_marks_is_named_or_the_first_that_is_nothing_else(tmp_path):
    for name in ("a_covered.png", "b.png", "c.png"):
        (tmp_path / name).touch()
    about = (
        '[fixed]\nfile = "a_covered.png"\n[graduation]\nspacing_um = 50\nfocal_length_mm = 200\n'
    )
    (tmp_path / "set.toml").write_text(about)
    assert read_calibration_set(tmp_path).marks_file == "b.png"
    (tmp_path / "set.toml").write_text(about + 'file = "c.png"\n')
    assert read_calibration_set(tmp_path).marks_file == "c.png"
    (tmp_path / "set.toml").write_text(about)
    for name in ("b.png", "c.png"):
        (tmp_path / name).unlink()
    with pytest.raises(BadInput, match="holds no picture of the scale"):
        read_calibration_set(tmp_path)
