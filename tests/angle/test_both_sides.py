"""Residuals on both sides: against a general solver for such fits, and what is shared by rows."""

import math
from dataclasses import replace

import numpy as np
import odrpack
import pytest

from readout.angle import Camera, Mounting, SharedInput, TiltSet, calibrate_known_tilts
from readout.angle.both_sides import fit_both_sides
from readout.angle.nominal import nominal_calibration
from readout.angle.optics import slopes_of_tilt
from readout.angle.tilt_model import choose_model

TRUE = nominal_calibration(
    focal_length_mm=120.0,
    pitch_um=6.0,
    image_width_px=640,
    image_height_px=480,
    rotation_deg=-3.0,
    mounting=Mounting.UPSIDE_DOWN,
)
CAMERA = Camera(640, 480, 6.0, Mounting.UPSIDE_DOWN)
GRID = np.stack(
    [g.ravel() for g in np.meshgrid(np.linspace(-400, 400, 4), np.linspace(-300, 300, 3))], axis=1
)


def coarse_set(rng: np.random.Generator, *, place_sd_px: float, tilt_sd_arcsec: float) -> TiltSet:
    """Both sides uncertain by like amounts, the places unlike along their own two directions."""
    n = len(GRID)
    true = GRID + np.array([20.0, -15.0]) + rng.normal(0, tilt_sd_arcsec, GRID.shape)
    cov = place_sd_px**2 * np.array([[1.0, 0.6], [0.6, 2.0]])
    places = np.stack(TRUE.position(true[:, 0], true[:, 1]), axis=1)
    places = places + rng.multivariate_normal([0, 0], cov, n)
    return TiltSet(
        names=tuple(f"{k}.png" for k in range(n)),
        position_px=places,
        position_cov_px2=np.tile([cov[0, 0], cov[0, 1], cov[1, 1]], (n, 1)),
        tilt_arcsec=GRID,
        sd_arcsec=np.full(n, tilt_sd_arcsec),
    )


def test_agrees_with_orthogonal_distance_regression():
    """odrpack (the ODRPACK95 of Zwolak, Boggs and Watson, ACM TOMS 33 (2007)) on the explicit
    model: places as values, tilts as uncertain abscissae, both with their full weights. The noise
    is coarse, so that a fit that took the tilts or the places for exact would differ."""
    given = coarse_set(np.random.default_rng(21), place_sd_px=0.5, tilt_sd_arcsec=3.0)
    fit = fit_both_sides(given, CAMERA, choose_model(given, CAMERA))

    def place(x, beta):
        w = np.stack(slopes_of_tilt(*(x + beta[4:6, None])))
        return np.linalg.solve(beta[:4].reshape(2, 2) * 1e-5, w) + np.array([CAMERA.centre_px]).T

    cov = np.array([[c[0], c[1], c[1], c[2]] for c in given.position_cov_px2]).reshape(-1, 2, 2)
    reference = odrpack.odr_fit(
        place,
        given.tilt_arcsec.T.copy(),
        given.position_px.T.copy(),
        np.array([*np.ravel(TRUE.matrix) * 1e5, 0.0, 0.0]),
        weight_x=np.full((2, len(GRID)), given.sd_arcsec**-2.0),
        weight_y=np.linalg.inv(cov[0]),
        diff_scheme="central",
        partol=1e-14,
        sstol=1e-14,
        maxit=200,
    )
    assert reference.success
    found = fit.parameters * [1e5, 1e5, 1e5, 1e5, 1, 1]
    sd = np.sqrt(np.diag(fit.cofactor)) * [1e5, 1e5, 1e5, 1e5, 1, 1]
    assert np.abs(found - reference.beta).max() > 0  # two ways of counting, not one
    assert np.abs((found - reference.beta) / sd).max() < 1e-3
    assert np.sum(fit.whitened**2) == pytest.approx(reference.sum_square, rel=1e-6)
    # cov_beta is not yet multiplied by the residual variance
    assert np.sqrt(np.diag(reference.cov_beta)) == pytest.approx(sd, rel=0.02)


def test_noisy_places_do_not_shorten_the_focal_length():
    """A fit that takes the places for exact is drawn towards small scales (attenuation by
    1 - var(noise)/var(places), C. Spearman, Am. J. Psychol. 15 (1904) 72). Here the noise is 36"
    of 245" along y and 26" of 298" along x: 1.5 % of the focal length."""
    rng = np.random.default_rng(22)
    found = []
    for _ in range(400):
        given = coarse_set(rng, place_sd_px=5.0, tilt_sd_arcsec=1.0)
        fit = fit_both_sides(given, CAMERA, choose_model(given, CAMERA))
        found.append(abs(np.linalg.det(fit.parameters[:4].reshape(2, 2))) ** -0.5)
    error = np.mean(found) / TRUE.focal_length_px - 1
    standard_error = np.std(found) / math.sqrt(len(found)) / TRUE.focal_length_px
    print(f"seed 22: mean focal length {error:+.5f} ± {standard_error:.5f} of the true one")
    assert abs(error) < 4 * standard_error < 0.01


@pytest.mark.parametrize("rows", [1, 4])
def test_what_all_rows_share_is_not_averaged_down(rows):
    """The scale of a stage, exactly: its variance is added whole, however many rows there are."""
    once = coarse_set(np.random.default_rng(23), place_sd_px=0.01, tilt_sd_arcsec=0.05)
    given = TiltSet(
        names=once.names * rows,
        position_px=np.tile(once.position_px, (rows, 1)),
        position_cov_px2=np.tile(once.position_cov_px2, (rows, 1)),
        tilt_arcsec=np.tile(once.tilt_arcsec, (rows, 1)),
        sd_arcsec=np.tile(once.sd_arcsec, rows),
    )
    alone = calibrate_known_tilts(given, CAMERA)
    scaled = calibrate_known_tilts(given, CAMERA, scale_rel_sd=2e-3)
    variance = (scaled.focal_length_px_sd / scaled.focal_length_px) ** 2
    own = (alone.focal_length_px_sd / alone.focal_length_px) ** 2
    assert math.sqrt(variance - own) == pytest.approx(2e-3, rel=1e-4)
    assert scaled.matrix == pytest.approx(np.array(alone.matrix), rel=1e-9)


def test_a_shared_error_that_differs_from_row_to_row_is_claimed_and_not_held_against_them():
    """Two levers with one error of length, one standard uncertainty long: far beyond the noise,
    within the claim, and no row's fault."""
    given = coarse_set(np.random.default_rng(24), place_sd_px=1e-3, tilt_sd_arcsec=0.01)
    long = np.arange(len(GRID)) % 2 == 0
    wrong = np.where(long[:, None], 0.001, 0.002) * GRID
    given = replace(
        given,
        tilt_arcsec=GRID + wrong,
        shared=(SharedInput("length of the levers", wrong),),
    )
    found = calibrate_known_tilts(given, CAMERA)
    error = found.focal_length_px / TRUE.focal_length_px - 1
    assert 0.0012 < abs(error) < 0.0018
    assert found.focal_length_px_sd / found.focal_length_px == pytest.approx(abs(error), rel=0.05)
    assert found.warnings == ("signs unproven: nudge the mirror and compare",)
    assert not any(row["outlier"] for row in found.residuals)
