"""The profile across an arm, fitted to certified peaks.

NIST Statistical Reference Datasets, nonlinear regression: Eckerle4, one Gaussian (K. F. Eckerle,
NIST, 197?), and Gauss1, two on a decaying ground (B. Rust, NIST, 1996), certified to 11 digits. The
data files come with the source archive of lmfit; the values below are typed from them.

A bar of half width h, seen by pixels of width c, both much thinner than the blur s, is a Gaussian
of variance s^2 + h^2/3 + c^2/12, but for terms of the fourth order in h/s and c/s.
"""

import math

import numpy as np
import pytest

from readout.least_squares import linear_least_squares
from readout.sighting.profile import line_profile

THIN = 0.05
"""half width and pixel, in units of x: thinner, and the profile's differences lose their digits"""

ECKERLE4 = """
    400 0.0001575 405 0.0001699 410 0.000235 415 0.0003102 420 0.0004917 425 0.000871 430
    0.0017418 435 0.00464 436.5 0.0065895 438 0.0097302 439.5 0.0149002 441 0.023731 442.5
    0.0401683 444 0.0712559 445.5 0.1264458 447 0.2073413 448.5 0.2902366 450 0.3445623 451.5
    0.3698049 453 0.3668534 454.5 0.3106727 456 0.2078154 457.5 0.1164354 459 0.0616764 460.5
    0.03372 462 0.0194023 463.5 0.0117831 465 0.0074357 470 0.0022732 475 0.00088 480 0.0004579
    485 0.0002345 490 0.0001586 495 0.0001143 500 0.000071
"""
GAUSS1 = """
    97.62227 97.80724 96.62247 92.59022 91.23869 95.32704 90.3504 89.46235 91.7252 89.86916
    86.88076 85.9436 87.60686 86.25839 80.74976 83.03551 88.25837 82.01316 82.74098 83.30034
    81.2785 81.85506 80.75195 80.09573 81.07633 78.81542 78.38596 79.93386 79.48474 79.95942
    76.10691 78.3983 81.4306 82.48867 81.65462 80.84323 88.68663 84.74438 86.83934 85.97739
    91.28509 97.22411 93.51733 94.10159 101.9176 98.43134 110.4214 107.6628 111.7288 116.5115
    120.7609 123.9553 124.2437 130.7996 133.296 130.7788 132.0565 138.6584 142.9252 142.7215
    144.1249 147.4377 148.2647 152.0519 147.3863 149.2074 148.9537 144.5876 148.1226 148.0144
    143.8893 140.9088 143.4434 139.3938 135.9878 136.3927 126.7262 124.4487 122.8647 113.8557
    113.7037 106.8407 107.0034 102.4629 96.09296 94.57555 86.98824 84.90154 81.18023 76.40117
    67.092 72.67155 68.10848 67.99088 63.34094 60.55253 56.18687 53.64482 53.70307 48.07893
    42.21258 45.65181 41.69728 41.24946 39.21349 37.71696 36.68395 37.30393 37.43277 37.45012
    32.64648 31.84347 31.39951 26.68912 32.25323 27.61008 33.58649 28.10714 30.26428 28.01648
    29.11021 23.02099 25.65091 28.50295 25.23701 26.13828 33.5326 29.25195 27.09847 26.52999
    25.52401 26.69218 24.55269 27.71763 25.20297 25.61483 25.06893 27.6393 24.94851 25.86806
    22.48183 26.90045 25.39919 17.90614 23.76039 25.89689 27.64231 22.86101 26.47003 23.72888
    27.54334 30.52683 28.07261 34.92815 28.29194 34.19161 35.41207 37.09336 40.9833 39.53923
    47.80123 47.46305 51.04166 54.58065 57.53001 61.42089 62.79032 68.51455 70.23053 74.42776
    76.59911 81.62053 83.42208 79.17451 88.56985 85.66525 86.55502 90.65907 84.2729 85.7222
    83.10702 82.16884 80.42568 78.15692 79.79691 77.84378 74.50327 71.57289 65.88031 65.01385
    60.19582 59.66726 52.95478 53.87792 44.91274 41.09909 41.68018 34.53379 34.86419 33.14787
    29.58864 27.29462 21.91439 19.08159 24.9029 19.82341 16.75551 18.24558 17.23549 16.34934
    13.71285 14.75676 13.97169 12.42867 14.35519 7.703309 10.23441 11.78315 13.87768 4.5357
    10.05928 8.424824 10.53312 9.602255 7.877514 6.258121 8.899865 7.877754 12.51191 10.66205
    6.0354 6.790655 8.783535 4.600288 8.400915 7.216561 10.01741 7.331278 6.527863 2.842001
    10.32507 4.790995 8.377101 6.264445 2.706213 8.362329 8.983658 3.362571 1.182746 4.875359
"""


def gauss_newton(columns, y, start):
    """Separable least squares, as an arm is fitted: what is linear is solved for at each step.

    ``columns(p)`` gives the linear columns (n, m) and a function that turns their coefficients into
    the derivatives by p, (n, len(p)). Steps that do not help are halved. Returns coefficients, p,
    their standard uncertainties, and the residuals.
    """
    p = np.array(start, dtype=float)

    def solved(p):
        linear, by_p = columns(p)
        return linear, by_p, linear_least_squares(linear, y)

    def norm2(fit):
        return fit.residuals @ fit.residuals

    linear, by_p, fit = solved(p)
    for _ in range(50):
        derivatives = by_p(fit.parameters)
        change = linear_least_squares(np.hstack([linear, derivatives]), fit.residuals)
        step = change.parameters[linear.shape[1] :]
        if np.all(np.abs(step) < 1e-10 * np.abs(p)):
            break
        for halvings in range(30):
            there = p + step / 2**halvings
            if np.all(there > 0):
                linear, by_p, trial = solved(there)
                if norm2(trial) <= norm2(fit) * (1 + 1e-9):  # nearer than that, rounding decides
                    break
        else:
            pytest.fail("no step helps")
        p, fit = there, trial
    else:
        pytest.fail("not settled")
    full = linear_least_squares(np.hstack([linear, by_p(fit.parameters)]), y)
    freedom = len(y) - full.cofactor.shape[0]
    residual_sd = math.sqrt(norm2(fit) / freedom)
    return fit.parameters, p, np.sqrt(np.diag(full.cofactor)) * residual_sd, fit.residuals


def peak(x, centre, blur):
    """Value, and derivatives by centre and blur, of a thin line's profile."""
    profile = line_profile(x - centre, THIN, blur, THIN)
    return profile.value, -profile.by_u, profile.by_blur


def sigma(blur):
    """Standard deviation of that profile."""
    return math.sqrt(blur**2 + THIN**2 / 3 + THIN**2 / 12)


@pytest.mark.parametrize("start", [(500.0, 10.0), (450.0, 5.0)], ids=["start 1", "start 2"])
def test_eckerle4(start):
    """y = b1/b2 exp(-(x - b3)^2 / 2 b2^2): its area is sqrt(2 pi) b1, the profile's 2 h."""
    x, y = np.array(ECKERLE4.split(), dtype=float).reshape(-1, 2).T
    assert len(x) == 35

    def columns(p):
        value, by_centre, by_blur = peak(x, *p)
        return value[:, None], lambda height: height[0] * np.stack([by_centre, by_blur], axis=1)

    (height,), (centre, blur), sd, residuals = gauss_newton(columns, y, start)
    to_b1 = 2 * THIN / math.sqrt(2 * math.pi)
    assert centre == pytest.approx(4.5154121844e02, rel=1e-10)
    assert sigma(blur) == pytest.approx(4.0888321754, rel=1e-8)
    assert height * to_b1 == pytest.approx(1.5543827178, rel=1e-8)
    assert sd[0] * to_b1 == pytest.approx(1.5408051163e-02, rel=1e-6)
    assert sd[1] == pytest.approx(4.6800518816e-02, rel=1e-6)
    assert sd[2] * blur / sigma(blur) == pytest.approx(4.6803020753e-02, rel=1e-6)
    assert residuals @ residuals == pytest.approx(1.4635887487e-03, rel=1e-8)


@pytest.mark.parametrize(
    "start",
    [(0.009, 65.0, 20.0, 178.0, 16.5), (0.0105, 63.0, 25.0, 180.0, 20.0)],
    ids=["start 1", "start 2"],
)
def test_gauss1(start):
    """Two peaks exp(-(x - b4)^2 / b5^2) on b1 exp(-b2 x): the centres of two lines side by side."""
    y = np.array(GAUSS1.split(), dtype=float)
    x = np.arange(1.0, 251.0)
    assert len(y) == 250

    def columns(p):
        decay, first, first_blur, second, second_blur = p
        ground = np.exp(-decay * x)
        one, two = peak(x, first, first_blur), peak(x, second, second_blur)

        def by_p(heights):
            parts = (-x * ground, one[1], one[2], two[1], two[2])
            of_which = (0, 1, 1, 2, 2)
            return np.stack([heights[k] * part for k, part in zip(of_which, parts, strict=True)], 1)

        return np.stack([ground, one[0], two[0]], axis=1), by_p

    root = math.sqrt(2)
    start = (start[0], start[1], start[2] / root, start[3], start[4] / root)
    heights, p, sd, residuals = gauss_newton(columns, y, start)
    decay, first, first_blur, second, second_blur = p
    assert first == pytest.approx(6.7481111276e01, rel=1e-9)
    assert second == pytest.approx(1.7899805021e02, rel=1e-9)
    assert root * sigma(first_blur) == pytest.approx(2.3129773360e01, rel=1e-8)
    assert root * sigma(second_blur) == pytest.approx(1.8389389025e01, rel=1e-8)
    assert (heights[0], decay) == pytest.approx((9.8778210871e01, 1.0497276517e-02), rel=1e-8)
    middle = [peak(np.zeros(1), 0.0, blur)[0][0] for blur in (first_blur, second_blur)]
    assert heights[1:] * middle == pytest.approx([1.0048990633e02, 7.1994503004e01], rel=1e-7)
    assert sd[[4, 6]] == pytest.approx([1.0460593412e-01, 1.2436988217e-01], rel=1e-6)
    assert residuals @ residuals == pytest.approx(1.3158222432e03, rel=1e-9)
