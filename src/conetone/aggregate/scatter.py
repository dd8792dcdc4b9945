"""What one replicate of each size adds to the variance of an exponent, from a pilot's copies.

Of few replicates such a variance is known badly: it is regularised across sizes.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from conetone.fit.resample import jackknife_variance

Floats = NDArray[np.float64]
Counts = NDArray[np.int64]

# A variance below this part of the largest sets no slope: such a size has next to no say in the exponent.
NEGLIGIBLE_PART = 1e-4
# Scatter τ of log b about a straight line in log n, and its prior, half of a normal distribution of width 1.
TAUS = np.linspace(0.05, 4.0, 80)
NEWTON_STEPS = 15


@dataclass(frozen=True)
class ReplicateVariance:
    """Variance b_i that one replicate of size i alone would leave in an exponent; arrays (sizes,).

    `log_error` is the standard error of log b_i; both are 0 at sizes that do not enter.
    """

    variance: Floats
    log_error: Floats


def replicate_variance(
    copies: Floats, copies_size: Counts, sizes: Counts, attempted: Counts
) -> ReplicateVariance:
    """b_i of one series from its delete-one copies, each of shape (copies,), regularised across sizes.

    The pilot's b_i is the jackknife variance of a size times its replicates `attempted`, so that a part that
    fails goes on failing. From m copies it is distributed as χ² of m − 1 degrees; log b_i has a Gaussian
    prior about a straight line in log n, whose width τ is averaged over. So a size whose few replicates
    happened to agree is drawn back to its neighbours. Raises ValueError for a size with one copy.
    """
    raw, degrees = np.zeros(len(sizes)), np.zeros(len(sizes))
    for i, size in enumerate(sizes):
        own = copies[copies_size == size]
        if len(own) == 1:
            raise ValueError(f"size {size} has one copy, of which no scatter is known")
        if len(own):
            raw[i] = attempted[i] * float(jackknife_variance(own))
            degrees[i] = len(own) - 1
    variance, error, enters = np.zeros(len(sizes)), np.zeros(len(sizes)), raw > 0
    if enters.any():
        kept = np.maximum(raw[enters], NEGLIGIBLE_PART * raw.max())
        mean, error[enters] = _about_a_line(np.log(sizes[enters]), np.log(kept), degrees[enters])
        # the mean of a log-normal: what is known badly counts as larger, never as a size to save on
        variance[enters] = np.exp(mean + 0.5 * error[enters] ** 2)
    return ReplicateVariance(variance, error)


def _about_a_line(abscissa: Floats, logs: Floats, degrees: Floats) -> tuple[Floats, Floats]:
    """Posterior mean and error of the logs θ of variances, estimated as `logs` with ν degrees of freedom.

    −log p = Σ ½ν (θ + e^(logs − θ)) + ½ θᵀPθ, P/τ⁻² the projection aside the line: Laplace's approximation at
    each τ, its mean corrected for the skewness of χ². What lies far below the line has little weight in it.
    """
    half, count = degrees / 2, len(logs)
    terms = np.stack([np.ones(count), abscissa - abscissa.mean()], axis=-1)
    aside = np.eye(count) - terms @ np.linalg.pinv(terms)
    prior = aside / TAUS[:, np.newaxis, np.newaxis] ** 2  # (τ, sizes, sizes)
    theta = np.tile(logs, (len(TAUS), 1))
    for _ in range(NEWTON_STEPS):
        weight = half * np.exp(logs - theta)
        inverse = np.linalg.inv(prior + weight[..., np.newaxis] * np.eye(count))
        slope = np.einsum("tij,tj->ti", prior, theta) + half - weight
        theta = theta - np.einsum("tij,tj->ti", inverse, slope)
    weight = half * np.exp(logs - theta)
    inverse = np.linalg.inv(prior + weight[..., np.newaxis] * np.eye(count))
    own = np.diagonal(inverse, axis1=1, axis2=2)
    likelihood = (
        -(half * theta + weight).sum(axis=-1)
        - 0.5 * np.einsum("ti,tij,tj->t", theta, prior, theta)
        + 0.5 * np.linalg.slogdet(inverse)[1]
        - max(count - 2, 0) * np.log(TAUS)
        - 0.5 * TAUS**2
    )
    share = np.exp(likelihood - likelihood.max())[:, np.newaxis]
    share /= share.sum()
    centre = theta + 0.5 * np.einsum("tij,tj->ti", inverse, weight * own)
    mean = (share * centre).sum(axis=0)
    return mean, np.sqrt((share * (own + (centre - mean) ** 2)).sum(axis=0))
