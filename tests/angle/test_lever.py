"""A lever raised by blocks: angles, what its rows share, and its worth told beforehand."""

import math
from dataclasses import replace

import numpy as np
import pytest

from readout.angle import Camera, Mounting, TiltSet, calibrate_known_tilts, nominal_calibration
from readout.angle.expected import expected_scale
from readout.angle.lever import LeverIs, LeverRow, LeverTilts, lever_tilts
from readout.errors import BadInput

TRUE = nominal_calibration(
    focal_length_mm=290.37,
    pitch_um=3.45,
    image_width_px=1280,
    image_height_px=960,
    rotation_deg=1.7,
    mounting=Mounting.SWAPPED_SIDES,
)
CAMERA = Camera(1280, 960, 3.45, Mounting.SWAPPED_SIDES)
LEVER_MM, LEVER_SD_MM = 200.0, 0.3
BLOCKS_MM = (0.05, 0.1, 0.3)
BLOCK_SD_MM, SEATING_SD_MM = 5e-4, 2e-4
HEIGHTS_MM = (0.0, 0.05, 0.1, 0.3, -0.3, -0.1, -0.05, 0.0, 0.3, 0.1)


def rows(axis=1):
    return [
        LeverRow(f"{k}.png", LEVER_MM, h, BLOCK_SD_MM if h else 0.0, axis)
        for k, h in enumerate(HEIGHTS_MM)
    ]


def made(axis=1):
    return lever_tilts(rows(axis), lever_sd_mm=LEVER_SD_MM, seating_sd_mm=SEATING_SD_MM)


def as_set(tilts: LeverTilts, places=None, place_sd=1e-3) -> TiltSet:
    n = len(tilts.sd_arcsec)
    return TiltSet(
        names=tuple(f"{k}.png" for k in range(n)),
        position_px=np.full((n, 2), np.nan) if places is None else places,
        position_cov_px2=np.tile([place_sd**2, 0.0, place_sd**2], (n, 1)),
        tilt_arcsec=tilts.tilt_arcsec,
        sd_arcsec=tilts.sd_arcsec,
        shared=tilts.shared,
    )


def seen_places(rng, tilts_arcsec):
    places = np.stack(TRUE.position(tilts_arcsec[:, 0], tilts_arcsec[:, 1]), axis=1)
    return places + rng.normal(0, 1e-3, places.shape)


def true_tilts(rng, axis=1):
    """The mirror's tilts for a lever and blocks that are not quite what is said of them."""
    length = LEVER_MM + rng.normal(0, LEVER_SD_MM)
    real = {h: h + rng.normal(0, BLOCK_SD_MM) for h in BLOCKS_MM}
    height = np.array([math.copysign(real[abs(h)], h) if h else 0.0 for h in HEIGHTS_MM])
    height = height + rng.normal(0, SEATING_SD_MM, len(height))
    tilt = np.full((len(height), 2), 4.0)
    tilt[:, axis] = np.degrees(np.arcsin(height / length)) * 3600 - 7.0
    return tilt


@pytest.mark.parametrize("lever_is", list(LeverIs))
def test_each_shared_error_by_differences(lever_is):
    """What a length or a block off by its standard uncertainty does, by the angles themselves."""
    steep = [LeverRow("a", 10.0, h, 1e-4, 0) for h in (6.0, -6.0, 3.0)]
    given = lever_tilts(steep, lever_is=lever_is, lever_sd_mm=1e-4)
    longer = lever_tilts([replace(r, lever_mm=10.0 + 1e-4) for r in steep], lever_is=lever_is)
    thicker = lever_tilts(
        [replace(r, height_mm=r.height_mm + math.copysign(1e-4, r.height_mm)) for r in steep],
        lever_is=lever_is,
    )
    length, block = given.shared
    by_length = longer.tilt_arcsec - given.tilt_arcsec
    by_block = thicker.tilt_arcsec - given.tilt_arcsec
    assert length.tilt_arcsec[:, 0] == pytest.approx(by_length[:, 0], rel=1e-3)
    assert block.tilt_arcsec[:2, 0] == pytest.approx(by_block[:2, 0], rel=1e-3)
    assert block.tilt_arcsec[2, 0] == 0.0  # a block used once is new in its row
    assert given.sd_arcsec == pytest.approx([0, 0, by_block[2, 0]], rel=1e-3)


def test_the_claim_covers_the_truth():
    """1000 levers, each with its own errors of length and blocks: 68 % to +-1.5 %."""
    tilts, rng, z = made(), np.random.default_rng(90), []
    for _ in range(1000):
        found = calibrate_known_tilts(
            as_set(tilts, seen_places(rng, true_tilts(rng))), CAMERA, way="lever"
        )
        z.append((found.focal_length_px - TRUE.focal_length_px) / found.focal_length_px_sd)
    inside = np.mean(np.abs(z) < 1)
    print(f"seed 90: {inside:.3f} of 1000 levers within one sd, mean {np.mean(z):+.3f}")
    assert 0.63 < inside < 0.73
    assert abs(np.mean(z)) < 4 / math.sqrt(1000)


def test_repeats_do_not_reduce_what_is_shared():
    """Many repeats with the same lever and blocks: length (and blocks) remain whole."""
    once, often = (
        expected_scale(
            as_set(
                lever_tilts(rows() * times, lever_sd_mm=LEVER_SD_MM, seating_sd_mm=SEATING_SD_MM)
            ),
            CAMERA,
        )
        for times in (1, 16)
    )
    assert often.rows_rel_sd == pytest.approx(once.rows_rel_sd / 4, rel=0.02)
    assert dict(often.shared_rel_sd)["length of the lever"] == pytest.approx(
        LEVER_SD_MM / LEVER_MM, rel=1e-3
    )
    assert often.rel_sd > LEVER_SD_MM / LEVER_MM


def test_what_is_told_beforehand_is_what_comes():
    told = expected_scale(as_set(made()), CAMERA, focal_length_px=TRUE.focal_length_px)
    rng = np.random.default_rng(91)
    claims = []
    for _ in range(40):
        found = calibrate_known_tilts(as_set(made(), seen_places(rng, true_tilts(rng))), CAMERA)
        claims.append(found.focal_length_px_sd / found.focal_length_px)
    assert told.rel_sd == pytest.approx(np.median(claims), rel=0.1)
    assert told.largest == told.shared_rel_sd[0][0]


def test_one_block_by_hand():
    """0, +h, -h: f ~ slope over heights, u(f)/f = hypot(u(L)/L, u(h)/h), text-book propagation."""
    three = [LeverRow(f"{k}.png", 100.0, h, 1e-3, 0) for k, h in enumerate((0.0, 0.1, -0.1))]
    told = expected_scale(
        as_set(
            lever_tilts(
                [replace(r, height_sd_mm=1e-3 if r.height_mm else 0) for r in three],
                lever_sd_mm=0.5,
            )
        ),
        CAMERA,
        place_sd_px=1e-4,
    )
    shared = dict(told.shared_rel_sd)
    assert shared["height 0.1 mm, used 2 times"] == pytest.approx(0.01, rel=1e-3)
    assert shared["length of the lever"] == pytest.approx(0.005, rel=1e-3)
    assert told.rel_sd == pytest.approx(math.hypot(0.01, 0.005), rel=1e-3)
    assert told.largest.startswith("height 0.1 mm")


def test_a_lever_shorter_than_the_height_is_refused_by_row():
    bad = [*rows(), LeverRow("tilts.csv, line 12", 5.0, 6.0, 0.1, 0)]
    with pytest.raises(BadInput, match=r"line 12: a lever of 5 mm cannot be raised by 6 mm"):
        lever_tilts(bad)
    lever_tilts(bad, lever_is=LeverIs.HORIZONTAL)  # along the ground it may be


def test_a_plan_that_determines_nothing():
    same = [LeverRow(f"{k}.png", 100.0, 0.1, 1e-3, 0) for k in range(4)]
    with pytest.raises(BadInput, match="all 4 rows say the same tilt"):
        expected_scale(as_set(lever_tilts(same)), CAMERA)
