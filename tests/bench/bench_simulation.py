"""What simulating costs: run with ``python -m tests.bench.bench_simulation`` from the repository.

Prints milliseconds a frame for the exact and the live path, and the share of a core the live
source takes at 30 frames a second, from the processor time of 10 real seconds.
"""

from __future__ import annotations

import statistics
import time
from collections.abc import Callable

import numpy as np

from readout.capture.simulated import SimulatedSource
from readout.simulation import Autocollimator, LiveRenderer, Motion, crossing_bound_cov, expose

SEED = 20261204
SIZES = ((640, 480), (1280, 720))
SOURCE_S = 10.0


def median_ms(work: Callable[[float], object], n: int) -> float:
    """Median of n runs, each with another sub-pixel phase."""
    spent = []
    for k in range(n):
        begin = time.perf_counter()
        work(0.37 * k % 1.0)
        spent.append(time.perf_counter() - begin)
    return 1e3 * statistics.median(spent)


def share_of_a_core(instrument: Autocollimator) -> tuple[float, int]:
    """Processor time over real time while the source is read, and the frames it gave."""
    with SimulatedSource(SEED, 30.0, autocollimator=instrument) as source:
        source.read(1.0)
        begin_s, begin_cpu_s, frames = time.monotonic(), time.process_time(), 0
        while time.monotonic() - begin_s < SOURCE_S:
            source.read(1.0)
            frames += 1
        return (time.process_time() - begin_cpu_s) / (time.monotonic() - begin_s), frames


def report(instrument: Autocollimator) -> str:
    rng = np.random.default_rng(SEED)
    renderer = LiveRenderer(instrument, rng)
    x_px, y_px = instrument.width_px / 2, instrument.height_px / 2

    def exact(phase: float) -> object:
        return expose(instrument.electrons(x_px + phase, y_px), instrument.sensor, rng)

    def live(phase: float) -> object:
        return renderer.frame(x_px + phase, y_px, rng)

    exact_ms, live_ms = median_ms(exact, 20), median_ms(live, 300)
    share, frames = share_of_a_core(instrument)
    cov = crossing_bound_cov(
        instrument.shape, x_px, y_px, instrument.picture_of_reticle, instrument.sensor
    )
    x_sd_px, y_sd_px = np.sqrt(np.diag(cov))
    return (
        f"exact {exact_ms:.1f} ms, live {live_ms:.2f} ms, "
        f"source at 30 a second {100 * share:.1f} % of a core ({frames} frames), "
        f"bound x {x_sd_px:.6f} y {y_sd_px:.6f} px"
    )


def main() -> None:
    print(f"seed {SEED}")
    motion = Motion(seed=SEED)
    print(f"motion {median_ms(lambda phase: motion.tilt(1e5 + phase), 200):.3f} ms a moment")
    for width_px, height_px in SIZES:
        instrument = Autocollimator(width_px=width_px, height_px=height_px)
        print(f"{width_px}x{height_px}: {report(instrument)}")


if __name__ == "__main__":
    main()
