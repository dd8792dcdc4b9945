"""Correlations of a data vector from few replicates, shrunk towards none (Ledoit & Wolf 2004).

"A well-conditioned estimator for large-dimensional covariance matrices", J. Multivariate Anal. 88, 365: the
sample matrix S and the identity are mixed, (1 − w) S + w 1, where w is the share of the squared distance
between them that is noise of S, estimated from the replicates themselves.
"""

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]

# Of three replicates a delete-one copy has two, whose correlations are ±1 whatever the truth is.
FEWEST_REPLICATES = 4
# Columns that are exactly proportional may ask for no shrinkage at all, which would leave a singular matrix.
SMALLEST_WEIGHT = 1e-6


def shrunk_correlation(values: Floats) -> Floats:
    """Shrunk correlation matrix (m, m) of values (replicates, m): positive definite, its diagonal is 1.

    A column that does not vary is uncorrelated with all others. Of fewer than three replicates nothing is
    known: the identity.
    """
    return _shrunk(values)


def shrunk_correlation_copies(values: Floats) -> Floats:
    """The same of all replicates, then estimated anew without each in turn; (1 + replicates, m, m).

    With fewer than four replicates all of them are the identity, so that copies and whole weigh alike.
    """
    count, width = values.shape
    if count < FEWEST_REPLICATES:
        return np.broadcast_to(np.eye(width), (1 + count, width, width))
    others = np.arange(count - 1) + (np.arange(count - 1) >= np.arange(count)[:, np.newaxis])
    return np.concatenate([_shrunk(values)[np.newaxis], _shrunk(values[others])])


def _shrunk(values: Floats) -> Floats:
    """Shrunk correlations (…, m, m) of values (…, replicates, m)."""
    count, width = values.shape[-2:]
    identity = np.eye(width)
    if count < FEWEST_REPLICATES - 1:
        return np.broadcast_to(identity, (*values.shape[:-2], width, width))
    standard = _standardised(values)
    squares = standard**2
    sample = np.swapaxes(standard, -1, -2) @ standard / count
    # Σ_ij of the variance of x_i x_j over replicates, divided by their number: noise of S
    fourth = (np.swapaxes(squares, -1, -2) @ squares).sum(axis=(-1, -2)) / count
    norm = (sample**2).sum(axis=(-1, -2))
    noise = (fourth - norm) / count
    # ‖S − 1‖² over the columns that vary
    distance = norm - sample.diagonal(axis1=-2, axis2=-1).sum(axis=-1)
    weight = np.divide(noise, distance, out=np.ones_like(noise), where=distance > noise)
    weight = np.maximum(weight, SMALLEST_WEIGHT)[..., np.newaxis, np.newaxis]
    return np.asarray(np.where(identity == 1, 1, (1 - weight) * sample))


def _standardised(values: Floats) -> Floats:
    """Values (…, replicates, m) with mean 0 and mean square 1; columns that do not vary are 0."""
    centred = values - values.mean(axis=-2, keepdims=True)
    # of equal numbers the mean may differ from them by rounding
    varies = np.ptp(values, axis=-2, keepdims=True) > 0
    scale = np.sqrt((centred**2).mean(axis=-2, keepdims=True))
    standard = np.divide(centred, scale, out=np.zeros_like(centred), where=varies & (scale > 0))
    return np.asarray(standard, dtype=np.float64)
