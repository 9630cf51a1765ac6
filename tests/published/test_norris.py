"""Linear least squares against certified values.

NIST Statistical Reference Datasets, linear regression, Norris (certified to 15 digits). The data
file comes with scipy's own tests; where an installation has left those out, with the values below
typed from it.
"""

import numpy as np
import pytest

from readout.least_squares import linear_least_squares

# (y, x) of the 36 observations
OBSERVATIONS = """
    0.1 0.2 338.8 337.4 118.1 118.2 888.0 884.6 9.2 10.1 228.1 226.5 668.5 666.3 998.5 996.3
    449.1 448.6 778.9 777.0 559.2 558.2 0.3 0.4 0.1 0.6 778.1 775.5 668.8 666.9 339.3 338.0
    448.9 447.5 10.8 11.6 557.7 556.0 228.3 228.1 998.0 995.8 888.8 887.6 119.6 120.2 0.3 0.3
    0.6 0.3 557.6 556.8 339.3 339.1 888.0 887.2 998.5 999.0 778.9 779.0 10.2 11.1 117.6 118.3
    228.9 229.2 668.4 669.1 449.2 448.9 0.2 0.5
"""
NORRIS = np.array(OBSERVATIONS.split(), dtype=float).reshape(-1, 2)


def test_norris_to_eleven_digits():
    y, x = NORRIS.T
    assert len(x) == 36
    fit = linear_least_squares(np.stack([np.ones_like(x), x], axis=1), y)
    certified = [-0.262323073774029, 1.00211681802045]
    assert fit.parameters == pytest.approx(certified, rel=1e-11)
    assert fit.parameters_sd == pytest.approx([0.232818234301152, 0.429796848199937e-3], rel=1e-11)
    assert fit.residual_sd == pytest.approx(0.884796396144373, rel=1e-11)
    assert (fit.residuals**2).sum() == pytest.approx(26.6173985294224, rel=1e-11)


def test_norris_covariance():
    """The covariance is computed, not certified, in the source that gives it."""
    y, x = NORRIS.T
    fit = linear_least_squares(np.stack([np.ones_like(x), x], axis=1), y)
    cov = fit.cofactor[0, 1] * fit.residual_sd**2
    assert cov == pytest.approx(-7.74327536339570e-05, rel=1e-11)


def test_gum_h3_thermometer():
    """JCGM 100:2008, annex H.3: calibration line of a thermometer, table H.6."""
    t = [21.521, 22.012, 22.512, 23.003, 23.507, 23.999, 24.513, 25.002, 25.503, 26.010, 26.511]
    b = [-0.171, -0.169, -0.166, -0.159, -0.164, -0.165, -0.156, -0.157, -0.159, -0.161, -0.160]
    fit = linear_least_squares(np.stack([np.ones(11), np.array(t) - 20], axis=1), np.array(b))
    assert fit.parameters == pytest.approx([-0.1712, 0.00218], abs=5e-5)
    assert fit.parameters_sd == pytest.approx([0.0029, 0.00067], abs=5e-5)
    assert fit.residual_sd == pytest.approx(0.0035, abs=5e-5)
    sd_product = np.prod(np.sqrt(np.diag(fit.cofactor)))
    assert fit.cofactor[0, 1] / sd_product == pytest.approx(-0.930, abs=5e-4)


def test_weights_count_as_repetitions():
    """Exact property: a weight of two is the value given twice."""
    x, y = np.arange(5.0), np.array([0.1, 1.3, 1.8, 3.2, 3.9])
    design = np.stack([np.ones(5), x], axis=1)
    twice = np.r_[0, 1, 2, 2, 3, 4]
    weighted = linear_least_squares(design, y, np.array([1.0, 1, 2, 1, 1]))
    repeated = linear_least_squares(design[twice], y[twice])
    assert weighted.parameters == pytest.approx(repeated.parameters, rel=1e-12)
    assert weighted.cofactor == pytest.approx(repeated.cofactor, rel=1e-12)


def test_too_few_values_are_refused():
    design = np.stack([np.ones(4), np.full(4, 2.0)], axis=1)
    with pytest.raises(np.linalg.LinAlgError, match="do not determine"):
        linear_least_squares(design, np.arange(4.0))
