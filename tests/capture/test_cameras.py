"""Cameras told apart, on folders laid out as Linux lays out /dev and /sys."""

from __future__ import annotations

import sys
from pathlib import Path

import pytest

from readout.capture import cameras
from readout.capture.cameras import Camera, find_camera, list_linux_cameras
from readout.errors import SourceLost
from tests.contracts import one_line

pytestmark = pytest.mark.skipif(sys.platform == "win32", reason="needs symbolic links")


class Machine:
    """Plug cameras in; each has a node for pictures and one for notes, as UVC cameras do."""

    def __init__(self, root: Path) -> None:
        self.dev, self.sysfs = root / "dev", root / "sys/class/video4linux"
        self.devices = root / "sys/devices"
        for folder in (self.dev / "v4l/by-id", self.dev / "v4l/by-path", self.sysfs, self.devices):
            folder.mkdir(parents=True)
        self.notes: set[Path] = set()
        self.denied = False

    def plug(self, number: int, port: str, *, name: str, serial: str = "", udev: bool = True):
        usb = self.devices / port
        (usb / f"{port}:1.0").mkdir(parents=True)
        (usb / "idVendor").write_text("1209\n")
        (usb / "idProduct").write_text("0001\n")
        if serial:
            (usb / "serial").write_text(serial + "\n")
        for index in (0, 1):
            node = self.dev / f"video{number + index}"
            node.touch()
            entry = self.sysfs / node.name
            entry.mkdir()
            (entry / "name").write_text(name + "\n")
            (entry / "index").write_text(f"{index}\n")
            (entry / "device").symlink_to(usb / f"{port}:1.0")
            if index == 1:
                self.notes.add(node)
            if udev:
                by_id = self.dev / f"v4l/by-id/usb-{name}_{serial}-video-index{index}"
                by_id.unlink(missing_ok=True)  # the last one plugged takes the name
                by_id.symlink_to(node)
                by_path = self.dev / f"v4l/by-path/pci-usb-{port}-video-index{index}"
                by_path.symlink_to(node)

    def list(self) -> list[Camera]:
        return list_linux_cameras(self.dev, self.sysfs, self.captures_video)

    def captures_video(self, node: Path) -> bool:
        if self.denied:
            raise PermissionError(13, "Permission denied")
        return node not in self.notes


@pytest.fixture
def machine(tmp_path: Path) -> Machine:
    return Machine(tmp_path)


def test_a_camera_with_a_serial_number_is_known_by_it(machine: Machine):
    machine.plug(0, "1-2", name="Cam", serial="SN7")
    assert machine.list() == [
        Camera(0, "Cam", "usb-Cam_SN7-video-index0", str(machine.dev / "video0"))
    ]


@pytest.mark.parametrize("serial", ["", "0001"])
def test_twins_are_told_apart_by_their_sockets(machine: Machine, serial: str):
    machine.plug(0, "1-2", name="Cam", serial=serial)
    machine.plug(2, "1-3", name="Cam", serial=serial)
    assert [(cam.index, cam.identity) for cam in machine.list()] == [
        (0, "pci-usb-1-2-video-index0"),
        (2, "pci-usb-1-3-video-index0"),
    ]


def test_without_udev_the_port_is_the_identity(machine: Machine):
    machine.plug(4, "2-1", name="Cam", serial="SN7", udev=False)
    assert [cam.identity for cam in machine.list()] == ["port-2-1:1.0"]


def test_sorted_by_number_and_listed_without_permission(machine: Machine):
    machine.plug(10, "1-2", name="Ten")
    machine.plug(2, "1-3", name="Two")
    machine.denied = True
    assert [(cam.index, cam.name) for cam in machine.list()] == [(2, "Two"), (10, "Ten")]


def test_found_by_index_identity_or_path(machine: Machine, monkeypatch: pytest.MonkeyPatch):
    machine.plug(0, "1-2", name="Cam", serial="SN7")
    monkeypatch.setattr(cameras, "list_cameras", machine.list)
    for which in ("0", "usb-Cam_SN7-video-index0", str(machine.dev / "video0")):
        assert find_camera(which).index == 0


def test_an_absent_camera_is_never_replaced(machine: Machine, monkeypatch: pytest.MonkeyPatch):
    monkeypatch.setattr(cameras, "list_cameras", machine.list)
    with pytest.raises(SourceLost, match="found: none"):
        find_camera("0")
    machine.plug(0, "1-2", name="Cam", serial="SN7")
    for which in ("1", "usb-Cam_SN8-video-index0", "Cam"):
        with pytest.raises(SourceLost, match=r"not connected.*usb:0 \(Cam, usb:usb-Cam_SN7") as it:
            find_camera(which)
        one_line(it.value)
