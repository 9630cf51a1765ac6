"""From a calibration set to a calibration: each frame sighted, the tilts fitted."""

from __future__ import annotations

import hashlib
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

import numpy as np

from readout.angle import Calibration, Camera, TiltSet, calibrate_known_tilts
from readout.errors import BadInput
from readout.files.calibration_set import CalibrationSet, KnownTilt
from readout.files.pictures import read_picture
from readout.model import Sighting
from readout.sighting import locate

LEAST_SD_ARCSEC = 1e-4
"""a tilt given as exact is weighted as if known to this"""


def calibrate_set(
    given: CalibrationSet, *, created_utc: str, on_frame: Callable[[int], None] | None = None
) -> Calibration:
    """Sight every frame of the set and fit the calibration.

    Frames that show no target, or only a doubtful one, are left out and named in the warnings.
    Raises BadInput where no calibration comes of it.
    """
    sizes: dict[tuple[int, int], str] = {}
    rows: list[tuple[KnownTilt, Sighting]] = []
    left_out = []
    digest = hashlib.sha256()
    for done, tilt in enumerate(given.tilts, start=1):
        path = given.folder / tilt.file
        pixels, full_scale = read_picture(path)
        digest.update(path.read_bytes())
        sizes.setdefault((pixels.shape[1], pixels.shape[0]), tilt.file)
        sighting = locate(pixels, full_scale=full_scale, target=given.target)
        if sighting.found and not sighting.quality:
            rows.append((tilt, sighting))
        else:
            words = " ".join(sighting.quality.words()).replace("_", " ")
            left_out.append(f"{tilt.file} was left out: {words}")
        if on_frame is not None:
            on_frame(done)
    (width_px, height_px), *others = sizes
    if others:
        names = list(sizes.values())
        raise BadInput(
            f"{given.folder / names[0]} and {names[1]} are of different size: "
            "take all frames of a set with one"
        )
    if not rows:
        raise BadInput(f"no frame in {given.folder} shows a {given.target.value}: look at them")
    digest.update(repr((given.tilts, given.scale_rel_sd, given.pitch_um)).encode())
    calibration = calibrate_known_tilts(
        TiltSet(
            names=tuple(tilt.file for tilt, _ in rows),
            position_px=np.array([(s.x_px, s.y_px) for _, s in rows]),
            position_cov_px2=np.array([s.cov_px2 for _, s in rows]),
            tilt_arcsec=np.array([(t.x_arcsec, t.y_arcsec) for t, _ in rows]),
            sd_arcsec=np.array([max(t.sd_arcsec, LEAST_SD_ARCSEC) for t, _ in rows]),
        ),
        Camera(width_px, height_px, given.pitch_um, given.mounting),
        scale_rel_sd=given.scale_rel_sd,
        created_utc=created_utc,
        calibration_id=f"tilts-{digest.hexdigest()[:10]}",
    )
    return replace(
        calibration,
        target=given.target,
        warnings=(*calibration.warnings, *left_out),
        made_from={
            "set": Path(given.folder).name,
            "note": given.note,
            "scale_rel_sd": given.scale_rel_sd,
            "frames": len(given.tilts),
        },
    )
