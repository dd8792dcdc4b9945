"""Weighted linear least squares over stacks of data vectors."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class LinearFit:
    """Result of a weighted linear least-squares fit; leading axes are those of the stack.

    `parameters` (…, k) = `gain` (…, k, m) applied to the values; `covariance` (…, k, k) holds if the m
    values scatter independently with the errors given; `chi2` (…).
    """

    parameters: Floats
    gain: Floats
    covariance: Floats
    chi2: Floats


def weighted_least_squares(design: Floats, values: Floats, errors: Floats) -> LinearFit:
    """Fit values (…, m) ± errors (…, m) by design (m, k) @ parameters (k,).

    The pseudo-inverse (singular values) of the scaled design keeps nearly collinear terms harmless.
    """
    scaled = design / errors[..., np.newaxis]
    inverse = np.asarray(np.linalg.pinv(scaled), dtype=np.float64)
    gain = inverse / errors[..., np.newaxis, :]
    parameters = np.einsum("...km,...m->...k", gain, values)
    residuals = (values - parameters @ design.T) / errors
    covariance: Floats = inverse @ np.swapaxes(inverse, -1, -2)
    return LinearFit(parameters, gain, covariance, (residuals**2).sum(axis=-1))
