"""The figures in docs/setting-up.md, from the formulas themselves."""

import math
import re
from pathlib import Path

import pytest
import typer.main

from readout.angle.distance import clear_range, shift_per_metre
from readout.angle.distance_fit import check_distance
from readout.angle.distance_rows import DistanceRow
from readout.cli.app import app

TEXT = (Path(__file__).parents[2] / "docs/setting-up.md").read_text(encoding="utf-8")


def table_after(heading):
    """Cells of the first table after some words, as texts."""
    lines = TEXT[TEXT.index(heading) :].splitlines()
    start = next(k for k, line in enumerate(lines) if line.startswith("|---"))
    rows = []
    for line in lines[start + 1 :]:
        if not line.startswith("|"):
            break
        rows.append([cell.strip() for cell in line.strip("|").split("|")])
    assert rows
    return rows


def number(cell):
    return float(re.sub(r"[^\d.]", "", cell))


def test_how_far_is_far():
    """The thin lens: 1/f = 1/D + 1/b."""
    for far, behind in table_after("Far means far"):
        distance_mm = number(far) * (1e6 if "km" in far else 1e3)
        image_mm = 1 / (1 / 300 - 1 / distance_mm)
        assert number(behind) == pytest.approx(image_mm - 300, abs=0.0005)


def test_where_vignetting_begins():
    for distance, *limits in table_after("How far off"):
        found = []
        for mirror_mm in (25, 12):
            limit = clear_range(1e3 * number(distance), objective_mm=40, mirror_mm=mirror_mm)
            found += [limit.whole_arcsec, limit.gone_arcsec]
        assert [number(cell) for cell in limits] == pytest.approx(found, abs=0.5)


def test_what_a_defocus_does():
    said = float(re.search(r"([\d.]+)″ a metre for 600″ and 1 mm", TEXT).group(1))
    shift = shift_per_metre(600.0, defocus_mm=1.0, focal_length_mm=300.0)
    assert -shift == pytest.approx(said, abs=0.05)


def test_how_well_the_defocus_is_known():
    said = float(re.search(r"the defocus is known to ([\d.]+) mm", TEXT).group(1))
    rows = [
        DistanceRow(distance, name, tilt, math.nan, 0.1)
        for distance in (300.0, 700.0, 1100.0, 1500.0, 1900.0)
        for name, tilt in (("low", -300.0), ("high", 300.0))
    ]
    found = check_distance(rows, focal_length_mm=300.0)
    assert found.defocus_u_mm == pytest.approx(said, abs=0.0005)


def test_columns_functions_and_commands_are_there():
    for column in ("distance_mm", "step", "x_arcsec", "y_arcsec", "sd_arcsec"):
        assert f"`{column}`" in TEXT
        assert column in DistanceRow.__slots__
    named = re.findall(r"`(readout(?:\.\w+)+)`", TEXT)
    assert named
    for name in named:
        module, function = name.rsplit(".", 1)
        assert callable(getattr(__import__(module, fromlist=[function]), function))

    called = [line.split()[1:] for line in re.findall(r"`(readout [^`]+)`", TEXT)]
    assert [words[0] for words in called].count("check") == 4
    for words in called:
        names = words[:2] if words[0] == "check" else words[:1]
        command = typer.main.get_command(app)
        for name in names:
            command = command.commands[name]
        known = {option for p in command.params for option in p.opts}
        assert {word for word in words if word.startswith("--")} <= known, words
