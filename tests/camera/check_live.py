"""``readout live --source usb:0`` against a camera whose truth is known, and whose plug is pulled.

    python check_live.py [GREY|YUYV]

Runs inside the virtual machine, in the folder that run.sh has laid out. Prints figures, one check
a line; exit status 1 if one fails.
"""

from __future__ import annotations

import datetime as dt
import json
import os
import signal
import subprocess
import sys
import threading
import time
import urllib.error
import urllib.request
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
from software_camera import SoftwareCamera, load, until

PORT = 8470
ROWS = 8  # each position is shown until this many readings of it have come ...
HELD_AT_MOST_S = 20.0  # ... or so long
SETTLED_S = 0.1  # a reading counts if its frame was taken so much later than the change
ANSWER_S = 5.0  # no question to the service takes longer, once it has begun to measure
START_S = 90.0  # an emulated processor imports slowly
BIAS_PX = 0.002  # what the first form of the sighting promises on clean frames
RMS_PER_BOUND = 2.0
STATE_WITHIN_S = 15.0
AGAIN_WITHIN_S = 30.0
LOST_UNASKED = 3  # on a busy host the emulated machine starves, and a silent child is replaced


class Checks:
    """Counts what fails and says everything."""

    def __init__(self) -> None:
        self.failed = 0

    def hold(self, good: bool, text: str) -> None:
        self.failed += not good
        print(f"{'ok    ' if good else 'FAILED'} {text}", flush=True)


class Log:
    """Every line of the logging endpoint, kept by a thread."""

    def __init__(self) -> None:
        self.rows: list[dict[str, Any]] = []
        self.error: Exception | None = None
        threading.Thread(target=self._run, daemon=True).start()

    def between(self, begin_s: float, end_s: float) -> list[dict[str, Any]]:
        return [row for row in list(self.rows) if begin_s <= row["utc_s"] < end_s]

    def _run(self) -> None:
        try:
            with urllib.request.urlopen(url("log?every_s=0&format=ndjson"), timeout=60) as lines:
                for line in lines:
                    row = json.loads(line)
                    if "t_utc" in row:
                        row["utc_s"] = dt.datetime.fromisoformat(row["t_utc"]).timestamp()
                        self.rows.append(row)
        except OSError as error:
            self.error = error


def url(path: str) -> str:
    return f"http://127.0.0.1:{PORT}/api/{path}"


def ask(path: str, timeout_s: float = ANSWER_S) -> tuple[int, dict[str, Any]]:
    """HTTP status and answer; status 0 while nobody listens."""
    try:
        with urllib.request.urlopen(url(path), timeout=timeout_s) as answer:
            return answer.status, json.load(answer)
    except urllib.error.HTTPError as error:
        return error.code, json.load(error)
    except (urllib.error.URLError, ConnectionError):
        return 0, {}


def state(timeout_s: float = ANSWER_S) -> str:
    return str(ask("status", timeout_s)[1].get("state", "none"))


def state_is(*wanted: str, timeout_s: float = ANSWER_S) -> Callable[[], bool]:
    return lambda: state(timeout_s) in wanted


def good(row: dict[str, Any]) -> bool:
    return row["x_arcsec"] is not None and not row["quality"]


def show(camera: SoftwareCamera, log: Log, position: int) -> list[dict[str, Any]]:
    """Hold a position and give the readings of frames taken meanwhile."""
    camera.position = position
    begin_s = time.time()
    while time.time() < begin_s + HELD_AT_MOST_S:
        time.sleep(0.1)
        rows = log.between(begin_s + SETTLED_S, time.time())
        if len(rows) >= ROWS:
            return rows
    return log.between(begin_s + SETTLED_S, time.time())


def measure(camera: SoftwareCamera, log: Log, scene: dict[str, Any], checks: Checks) -> None:
    """Every position against its truth."""
    errors: dict[str, list[float]] = {"x": [], "y": []}
    claimed: dict[str, list[float]] = {"x": [], "y": []}
    bounds: dict[str, list[float]] = {"x": [], "y": []}
    flagged = total = lost = 0
    for number, truth in enumerate(scene["positions"]):
        rows = show(camera, log, number)
        while len(rows) < ROWS and lost <= LOST_UNASKED:
            lost += 1
            print(f"       place {number}: {len(rows)} readings; {ask('health')[1]}", flush=True)
            rows = show(camera, log, number)
        total += len(rows)
        flagged += sum(not good(row) and row["quality"] != ["settling"] for row in rows)
        rows = [row for row in rows if good(row)]
        for axis in ("x", "y"):
            errors[axis] += [row[f"{axis}_arcsec"] - truth[f"{axis}_arcsec"] for row in rows]
            claimed[axis] += [row[f"{axis}_sd_arcsec"] for row in rows]
            bounds[axis] += [truth[f"{axis}_bound_px"]] * len(rows)
    checks.hold(lost <= LOST_UNASKED, f"{total} readings; interrupted {lost} times unasked")
    checks.hold(flagged == 0, f"{flagged} of them flagged")
    scale = arcsec_per_px(scene)
    independent = len(scene["positions"]) * scene["variants"]
    for axis in ("x", "y"):
        error_px = np.array(errors[axis]) / scale
        bound_px = float(np.sqrt(np.mean(np.square(bounds[axis]))))
        rms_px = float(np.sqrt(np.mean(error_px**2)))
        bias_px = float(error_px.mean())
        bias_se_px = float(error_px.std() / np.sqrt(min(independent, error_px.size)))
        claimed_px = float(np.sqrt(np.mean(np.square(claimed[axis])))) / scale
        checks.hold(
            abs(bias_px) <= BIAS_PX + 3 * bias_se_px,
            f"{axis}: bias {bias_px:+.5f} px = {bias_px * scale:+.5f} arcsec "
            f"(standard error {bias_se_px:.5f} px)",
        )
        checks.hold(
            rms_px <= RMS_PER_BOUND * bound_px,
            f"{axis}: rms {rms_px:.5f} px = {rms_px * scale:.5f} arcsec, "
            f"{rms_px / bound_px:.2f} of the Cramér-Rao bound; claimed sd {claimed_px:.5f} px",
        )


def arcsec_per_px(scene: dict[str, Any]) -> float:
    """From the two positions farthest apart in x: near enough to turn errors into pixels."""
    places = sorted(scene["positions"], key=lambda p: p["x_px"])
    (a, b) = places[0], places[-1]
    moved_arcsec = np.hypot(b["x_arcsec"] - a["x_arcsec"], b["y_arcsec"] - a["y_arcsec"])
    return float(moved_arcsec / np.hypot(b["x_px"] - a["x_px"], b["y_px"] - a["y_px"]))


def outage(
    name: str,
    begin: Callable[[], None],
    end: Callable[[], None],
    states: tuple[str, ...],
    camera: SoftwareCamera,
    log: Log,
    scene: dict[str, Any],
    checks: Checks,
) -> None:
    """Take the frames away, wait for the state that says so, bring them back, read again."""
    begin()
    gone_s = time.time()
    told_s = until(state_is(*states), STATE_WITHIN_S, f"state {states} after {name}")
    found = state()
    code, answer = ask("health")
    checks.hold(
        code == 503, f"{name}: {found} after {told_s:.2f} s; health {code}, {answer.get('detail')}"
    )
    time.sleep(2.0)
    stale = [row for row in log.between(gone_s + 0.5, time.time()) if good(row)]
    checks.hold(not stale, f"{name}: {len(stale)} readings while there was nothing to read")
    end()
    again_s = until(state_is("measuring"), AGAIN_WITHIN_S, f"measuring after {name}")
    time.sleep(1.5)  # a camera opened anew says for a second that it is settling
    rows = [row for row in show(camera, log, 3) if good(row)]
    truth = scene["positions"][3]
    off = [abs(row["x_arcsec"] - truth["x_arcsec"]) for row in rows] or [np.inf]
    checks.hold(
        max(off) < 0.1,
        f"{name}: measuring again after {again_s:.2f} s, {len(rows)} readings, "
        f"largest error {max(off):.4f} arcsec",
    )


def main(fourcc: str) -> int:
    folder = Path.cwd()
    scene = json.loads((folder / "scene.json").read_text(encoding="utf-8"))
    camera = load(folder, fourcc)
    camera.plug()
    print(f"seed {scene['seed']}, format {fourcc}", flush=True)
    checks = Checks()
    command = [
        *(sys.executable, "-m", "readout", "live", "--source", "usb:0", "--no-browser"),
        *("--calibration", "calibration.json", "--data", "/tmp/data"),
        *("--settings", "/tmp/settings.json", "--port", str(PORT)),
    ]
    began = time.monotonic()
    live = subprocess.Popen(command, env={**os.environ, "PYTHONPATH": str(folder)})
    try:
        measuring = state_is("measuring", timeout_s=START_S)
        until(lambda: measuring() or live.poll() is not None, START_S, "state measuring")
        print(
            f"       first reading {time.monotonic() - began:.1f} s after the command", flush=True
        )
        log = Log()
        time.sleep(2.0)
        status = ask("status")[1]
        print(f"       {status['source']}, {status['frames_per_s']} frames a second", flush=True)
        checks.hold(status["simulated"] is False, "not marked as simulated")
        measure(camera, log, scene, checks)
        both = (camera, log, scene, checks)
        outage("unplugged", camera.unplug, camera.plug, ("lost",), *both)
        outage("stalled", camera.stall, camera.go_on, ("stalled", "lost"), *both)
        outage("unplugged again", camera.unplug, camera.plug, ("lost",), *both)
        checks.hold(log.error is None, f"the logging endpoint stayed open: {len(log.rows)} rows")
    except (TimeoutError, KeyError) as error:
        checks.hold(False, f"{type(error).__name__}: {error}")
    finally:
        live.send_signal(signal.SIGTERM)
        asked = time.monotonic()
        try:
            code = live.wait(15.0)
        except subprocess.TimeoutExpired:
            live.kill()
            code = -9
        checks.hold(
            code == 0, f"SIGTERM: exit status {code} after {time.monotonic() - asked:.2f} s"
        )
        time.sleep(1.0)
        checks.hold(not left_over(), f"processes left: {left_over()}")
    camera.unplug()
    print(f"{checks.failed} checks failed", flush=True)
    return 1 if checks.failed else 0


def left_over() -> list[str]:
    """Command lines of children that outlived the command."""
    found = []
    for process in Path("/proc").glob("[0-9]*/cmdline"):
        try:
            line = process.read_bytes().replace(b"\0", b" ").decode(errors="replace")
        except OSError:
            continue
        if "multiprocessing" in line or "readout live" in line:
            found.append(line.strip())
    return found


if __name__ == "__main__":
    sys.exit(main(sys.argv[1] if len(sys.argv) > 1 else "YUYV"))
