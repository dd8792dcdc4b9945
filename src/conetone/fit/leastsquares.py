"""Weighted linear least squares over stacks of data vectors."""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class LinearFit:
    """Result of a linear least-squares fit; leading axes are those of the stack.

    `parameters` (…, k) = `gain` (…, k, m) applied to the values; `covariance` (…, k, k) holds if the m
    values scatter as they were said to; `chi2` (…).
    """

    parameters: Floats
    gain: Floats
    covariance: Floats
    chi2: Floats


def weighted_least_squares(design: Floats, values: Floats, errors: Floats) -> LinearFit:
    """Fit values (…, m) ± errors (…, m), independent of each other, by design (m, k) @ parameters (k,).

    The pseudo-inverse (singular values) of the scaled design keeps nearly collinear terms harmless.
    """
    return _of_whitened(
        design / errors[..., np.newaxis], values / errors, lambda gain: gain / errors[..., np.newaxis, :]
    )


def generalised_least_squares(design: Floats, values: Floats, covariance: Floats) -> LinearFit:
    """The same for values whose covariance (…, m, m) is given, positive definite.

    Raises numpy.linalg.LinAlgError if it is not.
    """
    root = np.linalg.cholesky(covariance)
    inverse = np.asarray(np.linalg.inv(root), dtype=np.float64)
    return _of_whitened(
        inverse @ design, (inverse @ values[..., np.newaxis])[..., 0], lambda gain: gain @ inverse
    )


def _of_whitened(design: Floats, values: Floats, unwhiten: Callable[[Floats], Floats]) -> LinearFit:
    """Ordinary least squares of values of unit variance; `unwhiten` makes its gain one of the data's own."""
    inverse = np.asarray(np.linalg.pinv(design), dtype=np.float64)
    parameters = (inverse @ values[..., np.newaxis])[..., 0]
    residuals = values - (design @ parameters[..., np.newaxis])[..., 0]
    covariance: Floats = inverse @ np.swapaxes(inverse, -1, -2)
    return LinearFit(parameters, unwhiten(inverse), covariance, (residuals**2).sum(axis=-1))
