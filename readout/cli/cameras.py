"""``readout cameras``."""

from __future__ import annotations

from dataclasses import asdict

from readout.cli.options import JsonOption
from readout.cli.say import print_json, print_line, warn

EXAMPLE = "Example: `readout cameras` prints what to give `--source` for each camera."


def cameras(json: JsonOption = False) -> None:
    """List the cameras connected now, and what identifies each."""
    from readout.capture.cameras import list_cameras

    found = list_cameras()
    if json:
        for camera in found:
            print_json(asdict(camera))
        return
    if not found:
        warn("no camera found: plug one in, or look whether the system sees it")
        return
    for camera in found:
        print_line(f"usb:{camera.index}  {camera.name}  {camera.path}")
        print_line(f"    the same one after plugging: usb:{camera.identity}")


command = cameras
