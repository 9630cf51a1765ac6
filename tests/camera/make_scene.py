"""Frames for the software camera, their truth, and the calibration to read them with.

    python make_scene.py FOLDER

Writes ``frames.npy`` (position, variant, row, column; uint8), ``scene.json`` and
``calibration.json``. Each position is one place of the crosshair; its variants differ in noise.
The frames come from `readout.simulation`, pixel by pixel and by the exact path, which shares
nothing with the fit.
"""

from __future__ import annotations

import json
import sys
from pathlib import Path

import numpy as np

from readout.files.calibration_file import save_calibration
from readout.simulation import Autocollimator, crossing_bound_cov, expose

SEED = 20_240_611  # any number would do; printed with the result
VARIANTS = 8
JUMPS = 16
LADDER = 8


def positions_px(width_px: int, height_px: int) -> list[tuple[float, float]]:
    """Places all over the picture at every sub-pixel phase, then a ladder of small steps.

    The places are multiples of two irrational numbers, folded into the middle 80 per cent.
    """
    far = [
        (
            width_px * (0.1 + 0.8 * (k * 0.7548776662 % 1)),
            height_px * (0.1 + 0.8 * (k * 0.56984 % 1)),
        )
        for k in range(1, JUMPS + 1)
    ]
    near = [(300.1 + 0.125 * k, 250.2 - 0.0625 * k) for k in range(LADDER)]
    return far + near


def main(folder: Path) -> None:
    instrument = Autocollimator()
    calibration = instrument.calibration()
    save_calibration(folder / "calibration.json", calibration)
    shape = instrument.height_px, instrument.width_px
    places = positions_px(instrument.width_px, instrument.height_px)
    frames = np.empty((len(places), VARIANTS, *shape), np.uint8)
    scene = []
    for number, (x_px, y_px) in enumerate(places):
        electrons = instrument.electrons(x_px, y_px)
        for variant in range(VARIANTS):
            rng = np.random.default_rng((SEED, number, variant))
            frames[number, variant] = expose(electrons, instrument.sensor, rng)
        bound = crossing_bound_cov(shape, x_px, y_px, instrument.reticle, instrument.sensor)
        x_arcsec, y_arcsec = calibration.tilt(x_px, y_px)
        scene.append(
            {
                "x_px": x_px,
                "y_px": y_px,
                "x_arcsec": float(x_arcsec),
                "y_arcsec": float(y_arcsec),
                "x_bound_px": float(np.sqrt(bound[0, 0])),
                "y_bound_px": float(np.sqrt(bound[1, 1])),
            }
        )
    np.save(folder / "frames.npy", frames)
    document = {"seed": SEED, "variants": VARIANTS, "positions": scene}
    (folder / "scene.json").write_text(json.dumps(document), encoding="utf-8")


if __name__ == "__main__":
    main(Path(sys.argv[1]))
