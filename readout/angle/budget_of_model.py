"""A budget from the model itself: the sensitivities are taken from the function.

JCGM 100:2008, 5.1.3, note 2: the contribution of an input is half the change of the result when
the input goes from its value minus to its value plus its standard uncertainty.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import replace

import numpy as np

from readout.angle.budget import LEVEL, Budget, Contribution, Correlation
from readout.model import F64

Model = Callable[[F64], F64 | float]
"""The result for inputs of shape (n,), or results (trials,) for (n, trials)."""


def budget_of_model(
    quantity: str,
    unit: str,
    model: Model,
    inputs: Sequence[Contribution],
    *,
    correlations: Sequence[Correlation] = (),
    level: float = LEVEL,
) -> Budget:
    """The budget of ``model`` at the inputs' values; their own sensitivities are not used.

    ``model`` takes the values of the inputs in their order, each in its own unit.
    """
    values = np.array([line.value for line in inputs])
    lines = []
    for i, line in enumerate(inputs):
        step = line.standard_uncertainty
        sensitivity = 0.0
        if step:
            up, down = values.copy(), values.copy()
            up[i] += step
            down[i] -= step
            sensitivity = float(model(up) - model(down)) / (2 * step)
        lines.append(replace(line, sensitivity=sensitivity))
    return Budget(quantity, float(model(values)), unit, tuple(lines), tuple(correlations), level)
