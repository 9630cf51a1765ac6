"""Linear least squares with weights, solved by QR, with what an uncertainty needs."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from readout.model import F64


@dataclass(frozen=True, slots=True)
class LinearFit:
    """Result of ``linear_least_squares`` for n values and p parameters.

    ``cofactor`` (p, p) is (J^T W J)^-1: the covariance where the weights are 1/variance, else to
    be multiplied by ``residual_sd`` squared. ``residual_sd``: sqrt(sum w r^2 / (n - p)), NaN
    without a degree of freedom.
    """

    parameters: F64
    cofactor: F64
    residuals: F64
    residual_sd: float

    @property
    def parameters_sd(self) -> F64:
        """Standard uncertainties where only the scatter tells the noise."""
        return np.asarray(np.sqrt(np.diag(self.cofactor)) * self.residual_sd)


def linear_least_squares(design: F64, values: F64, weights: F64 | None = None) -> LinearFit:
    """Parameters that minimise sum w (values - design @ parameters)^2.

    ``design`` (n, p), ``values`` (n,), ``weights`` (n,) > 0 or None. Columns are brought to one
    length first, so that their units do not matter (A. Bjoerck, Numerical Methods for Least
    Squares Problems, 1996, 2.9). Raises numpy.linalg.LinAlgError if the rank is less than p.
    """
    root = np.ones(len(values)) if weights is None else np.sqrt(weights)
    weighted = design * root[:, None]
    length = np.linalg.norm(weighted, axis=0)
    q, r = np.linalg.qr(weighted / np.where(length > 0, length, 1.0))
    diagonal = np.abs(np.diag(r))
    if diagonal.min(initial=np.inf) <= max(design.shape) * np.finfo(float).eps * max(
        diagonal.max(initial=0.0), 1e-300
    ):
        raise np.linalg.LinAlgError("the data do not determine all parameters")
    inverse = np.linalg.inv(r)
    parameters = (inverse @ (q.T @ (values * root))) / length
    residuals = values - design @ parameters
    freedom = len(values) - design.shape[1]
    return LinearFit(
        parameters,
        (inverse @ inverse.T) / np.outer(length, length),
        residuals,
        float(np.sqrt((root * residuals) @ (root * residuals) / freedom)) if freedom else np.nan,
    )
