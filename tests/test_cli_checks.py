"""``readout check`` and ``readout drift``: what a person and a script get of them."""

from __future__ import annotations

import json
import math
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any, NamedTuple

import numpy as np
import pytest

from readout.angle import nominal_calibration
from readout.cli.app import main
from readout.files.calibration_file import save_calibration


class Ended(NamedTuple):
    """What a command left behind."""

    status: int
    out: str
    err: str

    @property
    def rows(self) -> list[dict[str, Any]]:
        return [json.loads(line) for line in self.out.splitlines()]


Command = Callable[..., Ended]


@pytest.fixture
def readout(capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch) -> Command:
    def run(*arguments: object) -> Ended:
        monkeypatch.setattr("sys.argv", ["readout", *map(str, arguments)])
        with pytest.raises(SystemExit) as ended:
            main()
        return Ended(int(ended.value.code or 0), *capsys.readouterr())

    return run


def refused(ended: Ended, *words: str) -> None:
    assert (ended.status, ended.out) == (1, "")
    assert ended.err.startswith("readout: ")
    assert ended.err.count("\n") == 1
    for word in words:
        assert word in ended.err


def record(path: Path, seed: int, n: int, *, per_h: float = 0.0) -> Path:
    """Readings once a second that scatter by 0.05", the mirror drifting in x."""
    rng = np.random.default_rng(seed)
    t = np.arange(float(n))
    x, y = 0.05 * rng.standard_normal((2, n))
    rows = np.stack([t, x + per_h * t / 3600, y], axis=1)
    np.savetxt(path, rows, fmt="%.6f", delimiter=",", header="t_s,x_arcsec,y_arcsec", comments="")
    return path


@pytest.mark.parametrize(
    "command", [("drift",), *(("check", c) for c in ("distance", "range", "floor", "linearity"))]
)
def test_each_has_an_example(readout: Command, command: tuple[str, ...]) -> None:
    shown = readout(*command, "--help")
    assert shown.status == 0
    assert f"readout {' '.join(command)}" in shown.out


# -- distance -------------------------------------------------------------------------------------

DEFOCUS_MM, FOCAL_MM, WAY_ARCSEC = 0.8, 300.0, 20.0


@pytest.fixture
def rows(tmp_path: Path) -> Path:
    """The distance law itself, without noise: S (1 + d/f - L d/f^2), on a way that pitches."""
    path = tmp_path / "rows.csv"
    lines = ["distance_mm,step,x_arcsec,y_arcsec,sd_arcsec"]
    for k, distance in enumerate((300, 700, 1100, 1500, 1900)):
        way = WAY_ARCSEC * (-1) ** k
        gain = 1 + DEFOCUS_MM / FOCAL_MM - distance * DEFOCUS_MM / FOCAL_MM**2
        lines += [f"{distance},{s},{(t + way) * gain:.9f},,0.1" for s, t in (("a", -9), ("b", 300))]
    path.write_text("\n".join(lines) + "\n", "utf-8")
    return path


def test_the_defocus_is_found_and_the_ways_tilt_apart(readout: Command, rows: Path) -> None:
    run = readout("check", "distance", rows, "--focal-length-mm", FOCAL_MM, "--json")
    assert (run.status, run.err) == (0, "")
    (found,) = run.rows
    assert found["defocus_mm"] == pytest.approx(DEFOCUS_MM, abs=1e-5)
    assert 0 < found["defocus_u_mm"] < 0.1
    way = [station["way_x_arcsec"] for station in found["stations"]]
    # From the first station's tilt, seen through its gain.
    first = 1 + DEFOCUS_MM / FOCAL_MM - 300 * DEFOCUS_MM / FOCAL_MM**2
    assert way == pytest.approx([0, -40 * first, 0, -40 * first, 0], abs=1e-3)
    said = readout("check", "distance", rows, "--focal-length-mm", FOCAL_MM)
    assert said.status == 0
    assert said.out.startswith("defocus +0.80")
    assert "beyond the focal plane" in said.out
    assert "the way itself tilts the mirror by 40" in said.out
    assert "note: whether the return was clipped was not checked" in said.out


def test_a_focal_length_in_doubt_widens_it(readout: Command, rows: Path) -> None:
    """u(d)/d = 2 u(f)/f, and little else with rows this good (d = r f^2 / (1 - r f))."""
    arguments = ("check", "distance", rows, "--focal-length-mm", FOCAL_MM, "--json")
    (sure,), (unsure,) = (
        readout(*arguments, *more).rows for more in ((), ("--focal-length-sd-mm", 30))
    )
    added = math.sqrt(unsure["defocus_u_mm"] ** 2 - sure["defocus_u_mm"] ** 2)
    assert added == pytest.approx(2 * 0.1 * DEFOCUS_MM, rel=0.01)


def test_a_distance_check_that_cannot_be_is_refused(
    readout: Command, rows: Path, tmp_path: Path
) -> None:
    focal = ("--focal-length-mm", FOCAL_MM)
    clipped = ("--objective-mm", 30, "--mirror-mm", 28)
    refused(readout("check", "distance", rows, *focal, *clipped), "row 4", "clipped")
    refused(readout("check", "distance", tmp_path / "none.csv", *focal), "none.csv")
    other = tmp_path / "other.csv"
    other.write_text("distance_mm,step,x_arcsec\n300,a,wide\n", "utf-8")
    refused(readout("check", "distance", other, *focal), "row 1", "x_arcsec", "'wide'")
    refused(readout("check", "distance", rows, "--focal-length-mm", 0), "0 mm")
    other.write_text("t_s,x_arcsec\n300,1\n", "utf-8")
    refused(readout("check", "distance", other, *focal), "no column distance_mm nor step")
    assert readout("check", "distance", rows).status == 2


# -- range ----------------------------------------------------------------------------------------


def test_the_range_at_each_distance(readout: Command) -> None:
    """tan 2t = (D -+ M) / 2 / L, in arc-seconds."""
    run = readout("check", "range", 500, 2000, "--objective-mm", 40, "--mirror-mm", 25, "--json")
    assert (run.status, run.err) == (0, "")
    for row, distance in zip(run.rows, (500, 2000), strict=True):
        assert row["distance_mm"] == distance
        for name, way in (("whole_arcsec", 7.5), ("gone_arcsec", 32.5)):
            expected = math.degrees(math.atan(way / distance)) / 2 * 3600
            assert row[name] == pytest.approx(expected, rel=1e-9)
    said = readout("check", "range", 500, "--objective-mm", 40, "--mirror-mm", 25)
    assert said.out == "at 500 mm the return is whole up to 1547″ and gone at 6694″\n"
    refused(readout("check", "range", 0, "--objective-mm", 40, "--mirror-mm", 25), "distance")


# -- floor and drift ------------------------------------------------------------------------------


def test_no_drift_below_the_floor_is_claimed(readout: Command, tmp_path: Path) -> None:
    kept = tmp_path / "floor.json"
    null = record(tmp_path / "null.csv", 1, 7200)
    made = readout("check", "floor", null, "--out", kept, "--json")
    assert (made.status, made.err) == (0, "")
    assert made.rows == [json.loads(kept.read_text("utf-8"))]
    assert made.rows[0]["x"]["noise_sd_arcsec"] == pytest.approx(0.05, rel=0.05)
    assert "null test of 120 min" in readout("check", "floor", null).out

    measured = record(tmp_path / "angles.csv", 2, 3600, per_h=0.6)
    run = readout("drift", measured, "--floor", kept, "--json")
    assert (run.status, run.err) == (0, "")
    (found,) = run.rows
    rate, sd = found["x_rate_arcsec_per_h"], found["x_rate_sd_arcsec_per_h"]
    assert abs(rate - 0.6) < 4 * sd
    assert [claim["verdict"] for claim in found["claims"]] == ["claimed", "within_floor"]
    said = readout("drift", measured, "--floor", kept).out
    assert "x: +0.6" in said
    assert "y: no drift is claimed" in said
    assert "claims" not in readout("drift", measured, "--json").rows[0]


def test_drift_has_what_is_promised(readout: Command, tmp_path: Path) -> None:
    """Every name that scripts rely on, at the nine points of NIST SP 1065 (2008), table 30."""
    path = tmp_path / "nine.csv"
    nine = (892, 809, 823, 798, 671, 644, 883, 903, 677)
    lines = [f"{k},{value},{-value}" for k, value in enumerate(nine)]
    path.write_text("\n".join(["t_s,x_arcsec,y_arcsec", *lines]) + "\n", "utf-8")
    (found,) = readout("drift", path, "--json").rows
    for axis, sign in (("x", 1), ("y", -1)):
        assert found[f"{axis}_rate_arcsec_per_h"] == pytest.approx(-10.2 * 3600 * sign)
        assert found[f"{axis}_rate_sd_arcsec_per_h"] > 0
        assert found[f"{axis}_mean_arcsec"] == pytest.approx(sign * 788.8889, abs=1e-4)
        assert found[f"{axis}_sd_arcsec"] == pytest.approx(100.977, abs=1e-3)
        assert found[f"{axis}_range_arcsec"] == 259
        allan = found["allan"]
        assert allan[f"{axis}_arcsec"][:2] == pytest.approx([91.22945, 85.95287], rel=1e-6)
        low, high = allan[f"{axis}_lo_arcsec"], allan[f"{axis}_hi_arcsec"]
        assert low[0] < 91.22945 < high[0]
    assert (found["n"], found["gaps"]) == (9, 0)
    assert (allan["tau_s"], allan["n"]) == ([1, 2, 3], [8, 6, 4])


def test_the_same_in_words(readout: Command, tmp_path: Path) -> None:
    path = record(tmp_path / "angles.csv", 3, 1200, per_h=3.0)
    lines = path.read_text("utf-8").splitlines()
    path.write_text("\n".join([*lines[:500], *lines[800:]]) + "\n", "utf-8")
    run = readout("drift", path)
    assert (run.status, run.err) == (0, "")
    assert run.out.splitlines()[:2] == [
        "rows           900 over 20 min, one every 1 s",
        "gaps           1 longer than three steps, the longest 5 min",
    ]
    assert "drift, ″/h" in run.out
    assert "100 s" in run.out


def test_records_that_cannot_be_used_are_refused(readout: Command, tmp_path: Path) -> None:
    good = record(tmp_path / "angles.csv", 4, 200)
    refused(readout("drift", tmp_path / "none.csv"), "none.csv", "does not exist")
    refused(readout("drift", good, "--floor", tmp_path / "none.json"), "none.json")
    refused(readout("drift", good, "--floor", good), "angles.csv", "no JSON")
    short = record(tmp_path / "short.csv", 5, 50)
    refused(readout("check", "floor", short), "50 readings are too few")
    refused(readout("check", "floor", good, "--out", good), "angles.csv", "another")
    flagged = tmp_path / "flagged.csv"
    flagged.write_text("t_s,x_arcsec,y_arcsec,quality\n0,1,1,dim\n1,1,1,dim\n2,1,1,dim\n", "utf-8")
    refused(readout("drift", flagged), "3 have a caution")
    assert readout("drift").status == 2


# -- linearity ------------------------------------------------------------------------------------


def test_a_periodic_error_in_a_calibration_is_found(readout: Command, tmp_path: Path) -> None:
    """A sine of 0.2" that comes back every 90" among residuals that scatter by 0.02"."""
    rng = np.random.default_rng(6)
    made = nominal_calibration(
        focal_length_mm=300, pitch_um=3.45, image_width_px=1280, image_height_px=960
    )
    angle = np.sort(rng.uniform(-400, 400, 60))
    x_px, y_px = made.position(angle, np.zeros(60))
    residual = 0.2 * np.sin(2 * np.pi * angle / 90) + 0.02 * rng.standard_normal(60)
    kept = [
        {"x_px": float(x), "y_px": float(y), "x_residual_arcsec": float(r)}
        for x, y, r in zip(x_px, y_px, residual, strict=True)
    ]
    path = tmp_path / "bench.json"
    save_calibration(path, replace(made, residuals=tuple(kept), n=60))
    run = readout("check", "linearity", path, "--period-arcsec", 90, "--json")
    assert (run.status, run.err) == (0, "")
    (found,) = run.rows
    assert found["axis"] == "x"
    sine = found["periodic"][-1]
    assert (sine["along"], sine["period"], sine["found"]) == ("angle_arcsec", 90, True)
    assert sine["amplitude_arcsec"] == pytest.approx(0.2, abs=4 * sine["amplitude_u_arcsec"])
    said = readout("check", "linearity", path, "--period-arcsec", 90).out
    assert "a periodic error of 0." in said
    assert "one cycle in 90″ of the angle" in said
    refused(readout("check", "linearity", path, "--period-arcsec", -1), "-1")
    save_calibration(path, made)
    refused(readout("check", "linearity", path), "10 or more")
