"""A ray trace of the autocollimator, independent of the package: plain vectors, finite apertures.

The reticle's centre at f + d_r behind a thin lens, rays through an even grid on the objective, a
flat mirror cut to a disc, the law of reflection, the objective again, a sensor at f + d. The
reading is half the arctangent of the mean place of the rays that came back, over f.
"""

from __future__ import annotations

import numpy as np

RAD = 180 * 3600 / np.pi


def traced_reading(
    tilt_arcsec,
    distance_mm,
    *,
    focal_mm=300.0,
    defocus_mm=0.0,
    reticle_defocus_mm=0.0,
    objective_mm=40.0,
    mirror_mm=20.0,
    across=801,
):
    """(reading in arc-seconds, share of the rays on the mirror that came back)."""
    side = np.linspace(-objective_mm / 2, objective_mm / 2, across)
    x, y = (axis.ravel() for axis in np.meshgrid(side, side))
    inside = np.hypot(x, y) <= objective_mm / 2
    start = np.stack([x, y, np.zeros_like(x)], axis=1)[inside]
    # A thin lens takes h / f from the slope of a ray at the height h, exactly for all rays of one
    # point of the axis.
    slope = start[:, :2] / (focal_mm + reticle_defocus_mm) - start[:, :2] / focal_mm
    ray = np.column_stack([slope, np.ones(len(slope))])
    ray /= np.linalg.norm(ray, axis=1)[:, None]

    tilt = tilt_arcsec / RAD
    normal = np.array([np.sin(tilt), 0.0, np.cos(tilt)])
    centre = np.array([0.0, 0.0, distance_mm])
    way = (centre - start) @ normal / (ray @ normal)
    hit = start + way[:, None] * ray
    on_mirror = np.linalg.norm(hit - centre, axis=1) <= mirror_mm / 2
    hit, ray = hit[on_mirror], ray[on_mirror]
    back = ray - 2 * (ray @ normal)[:, None] * normal

    at_lens = hit - back * (hit[:, 2] / back[:, 2])[:, None]
    through = np.hypot(at_lens[:, 0], at_lens[:, 1]) <= objective_mm / 2
    height, back = at_lens[through, :2], back[through]
    if not through.any():
        return np.nan, 0.0
    slope = back[:, :2] / -back[:, 2:] - height / focal_mm
    place = height + slope * (focal_mm + defocus_mm)
    return -np.arctan(place[:, 0].mean() / focal_mm) / 2 * RAD, through.mean()
