"""The least uncertainty with which any unbiased fit can place something in one frame.

The Cramér-Rao bound: the inverse of the Fisher information of all pixels, sum of the products of
derivatives of the expected level divided by its variance (C. R. Rao 1945, H. Cramér 1946; for a
position on a pixel array: K. A. Winick, J. Opt. Soc. Am. A 3 (1986) 1809). It holds for any model
of a frame: a line, a crosshair, a spot.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Final

import numpy as np

from readout.model import F64

LEAST_INFORMATION: Final = 1e-10
"""Below this part of its largest possible value, information is rounding of the differences."""

UNKNOWN_SHARE: Final = 1e-6
"""A parameter with more than this share in what the pixels do not fix counts as not fixed."""


def cramer_rao_cov(
    expected: Callable[[F64], F64], parameters: F64, steps: F64, variance: F64
) -> F64:
    """Covariance bound of ``parameters``, shape (n, n), for independent normal or Poisson pixels.

    Parameters
    ----------
    expected : function
        Expected levels, any shape, for n parameters.
    parameters, steps : array (n,)
        Where the bound is wanted, and over how much the central differences go that stand for
        derivatives, all > 0.
    variance : array, shape of the levels
        Variance of each pixel, all > 0: photons, read noise, rounding (1/12 level^2).

    Returns
    -------
    array (n, n)
        In the units of the parameters. The information in the variance itself is left out: it is
        smaller by twice the number of electrons of a pixel. A parameter the pixels do not fix,
        alone or against others, gets an infinite variance and no covariance; the rest is not
        harmed by it.
    """
    derivatives = np.stack(
        [
            (expected(parameters + step) - expected(parameters - step)).ravel() / (2 * size)
            for size, step in zip(steps, np.diag(steps), strict=True)
        ]
    )
    information = (derivatives / variance.ravel()) @ derivatives.T
    scale = np.sqrt(np.diag(information))
    scale[scale == 0] = 1.0
    eigenvalues, vectors = np.linalg.eigh(information / np.outer(scale, scale))
    known = eigenvalues > LEAST_INFORMATION
    cov = (vectors[:, known] / eigenvalues[known]) @ vectors[:, known].T / np.outer(scale, scale)
    unknown = (vectors[:, ~known] ** 2).sum(axis=1) > UNKNOWN_SHARE
    cov[unknown, :] = cov[:, unknown] = 0.0
    cov[unknown, unknown] = np.inf
    return np.asarray(cov)
