"""EURACHEM/CITAC Guide (Quantifying Uncertainty), example A5: a value read back from a line.

Data as a public library's test quotes them; slope, intercept, c0 and u(c0) are values from memory,
confirmed by computation.
"""

import math

import numpy as np
import pytest

from readout.angle.budget import Contribution, Correlation
from readout.angle.budget_of_model import budget_of_model
from readout.least_squares import linear_least_squares

X = np.repeat([0.1, 0.3, 0.5, 0.7, 0.9], 3)
Y = np.array(
    [
        [0.028, 0.029, 0.029],
        [0.084, 0.083, 0.081],
        [0.135, 0.131, 0.133],
        [0.180, 0.181, 0.183],
        [0.215, 0.230, 0.216],
    ]
).ravel()
READ = np.array([0.0712, 0.0716])


def test_a5_read_back_from_the_line():
    fit = linear_least_squares(np.stack([np.ones(15), X], axis=1), Y)
    intercept, slope = fit.parameters
    assert slope == pytest.approx(0.2410, abs=5e-5)
    assert intercept == pytest.approx(0.0087, abs=5e-5)
    u = fit.parameters_sd
    r = fit.cofactor[0, 1] / math.sqrt(fit.cofactor[0, 0] * fit.cofactor[1, 1])
    budget = budget_of_model(
        "c0",
        "mg/l",
        lambda x: (x[2] - x[0]) / x[1],
        [
            Contribution("intercept", u[0], "1", freedom=13, value=intercept),
            Contribution("slope", u[1], "l/mg", freedom=13, value=slope),
            # two readings, each with the scatter about the line
            Contribution(
                "reading", fit.residual_sd / math.sqrt(2), "1", freedom=13, value=READ.mean()
            ),
        ],
        correlations=[Correlation("intercept", "slope", r)],
    )
    assert budget.value == pytest.approx(0.260, abs=5e-4)
    assert budget.combined_u == pytest.approx(0.018, abs=5e-4)
    # the formula of the guide: s/b sqrt(1/p + 1/n + (c0 - mean)^2 / Sxx)
    sxx = ((X - X.mean()) ** 2).sum()
    root = math.sqrt(1 / 2 + 1 / 15 + (budget.value - X.mean()) ** 2 / sxx)
    assert budget.combined_u == pytest.approx(fit.residual_sd / slope * root, rel=5e-3)
