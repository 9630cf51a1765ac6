"""Prints what each source costs: opening with the first frame, and each further frame.

    python -m tests.bench.bench_capture [--frames N]

Frames are 1280x720, 8 bit, the simulated crosshair with its noise. CPU time is that of this
process and all its threads; wall time of a network source includes its server in the same
process, so look at the CPU time of the others. Seed 3. Nothing is asserted.
"""

from __future__ import annotations

import argparse
import contextlib
import resource
import tempfile
import time
from pathlib import Path

import cv2
import numpy as np

from readout.capture.folder import FolderSource
from readout.capture.mjpeg import MjpegSource
from readout.capture.open import open_source
from readout.capture.source import Source
from readout.capture.stream import StreamSource
from readout.capture.usb import luminance_of
from readout.capture.video import VideoSource
from readout.files.pictures import encode_jpeg, write_picture
from readout.model import Pixels
from readout.simulation import Autocollimator, expose
from tests.capture.streams import Client, part, serving

WIDTH, HEIGHT = 1280, 720
SEED = 3


def pictures(count: int) -> list[Pixels]:
    instrument = Autocollimator(width_px=WIDTH, height_px=HEIGHT)
    electrons = instrument.electrons(WIDTH / 2 + 3.3, HEIGHT / 2 - 2.7)
    rng = np.random.default_rng(SEED)
    return [expose(electrons, instrument.sensor, rng) for _ in range(count)]


def cpu_s() -> float:
    used = resource.getrusage(resource.RUSAGE_SELF)
    return used.ru_utime + used.ru_stime


def measure(name: str, source: Source, frames: int) -> None:
    began_s = time.perf_counter()
    with source:
        source.read(10.0)
        first_ms = (time.perf_counter() - began_s) * 1e3
        began_s, began_cpu_s = time.perf_counter(), cpu_s()
        for _ in range(frames - 1):
            source.read(10.0)
        wall_ms = (time.perf_counter() - began_s) / (frames - 1) * 1e3
        cpu_ms = (cpu_s() - began_cpu_s) / (frames - 1) * 1e3
    print(f"{name:24} {first_ms:10.1f} {wall_ms:12.2f} {cpu_ms:12.2f}")


def video(path: Path, codec: str, shown: list[Pixels]) -> Path:
    code = cv2.VideoWriter.fourcc(*codec)
    options = [cv2.VIDEOWRITER_PROP_IS_COLOR, 0]
    writer = cv2.VideoWriter(str(path), cv2.CAP_FFMPEG, code, 30.0, (WIDTH, HEIGHT), options)
    for pixels in shown:
        writer.write(pixels)
    writer.release()
    return path


def files_and_streams(frames: int) -> None:
    shown = pictures(8)
    repeated = [shown[k % len(shown)] for k in range(frames)]
    print(f"{'source':24} {'first ms':>10} {'wall ms/fr':>12} {'CPU ms/fr':>12}")
    with tempfile.TemporaryDirectory() as name, contextlib.ExitStack() as stack:
        folder = Path(name)
        for suffix in ("png", "tif", "jpg"):
            (folder / suffix).mkdir()
            for number, pixels in enumerate(repeated):
                write_picture(folder / suffix / f"{number:05d}.{suffix}", pixels)
            measure(f"folder of {suffix}", FolderSource(folder / suffix), frames)
        for codec, file in (("MJPG", "a.avi"), ("FFV1", "a.mkv"), ("mp4v", "a.mp4")):
            path = video(folder / file, codec, repeated)
            measure(f"video {codec}", VideoSource(path), frames)
        parts = [part(encode_jpeg(pixels)) for pixels in shown]

        def script(client: Client) -> None:
            client.begin()
            for number in range(2 * frames):
                client.send(parts[number % len(parts)])
                time.sleep(0.004)  # or frames would be dropped, which is cheap
            client.hang()

        measure("mjpeg over http", MjpegSource(stack.enter_context(serving(script))), frames)
        data = (folder / "a.avi").read_bytes()

        def send_file(client: Client) -> None:
            client.begin("video/x-msvideo")
            client.send(data)

        measure(
            "avi over http, FFMPEG", StreamSource(stack.enter_context(serving(send_file))), frames
        )
    measure("simulated 640x480", open_source("simulated", frames_per_s=120.0), frames)


def buffers(rounds: int) -> None:
    """What is made of a camera's buffer, without the camera."""
    grey = pictures(1)[0]
    yuyv = np.full((HEIGHT, WIDTH, 2), 128, np.uint8)
    yuyv[..., 0] = grey
    packet = np.frombuffer(encode_jpeg(grey), np.uint8)[None, :]
    print(f"\n{'camera buffer':24} {'CPU ms':>10}")
    for fourcc, buffer in (
        ("GREY", grey),
        ("YUYV", yuyv),
        ("MJPG", packet),
        ("", np.dstack([grey] * 3)),
    ):
        began_s = cpu_s()
        for _ in range(rounds):
            luminance_of(buffer, fourcc, (HEIGHT, WIDTH))
        print(f"{fourcc or 'blue-green-red':24} {(cpu_s() - began_s) / rounds * 1e3:10.3f}")


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--frames", type=int, default=120)
    frames = parser.parse_args().frames
    print(f"OpenCV {cv2.__version__}, {WIDTH}x{HEIGHT}, {frames} frames, seed {SEED}\n")
    files_and_streams(frames)
    buffers(frames)


if __name__ == "__main__":
    main()
