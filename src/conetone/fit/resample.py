"""The delete-one jackknife over replicates."""

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]


def jackknife_variance(copies: Floats) -> Floats:
    """(m − 1)/m Σ (copy − mean copy)² over axis 0, the m delete-one copies of one sample (Quenouille, Tukey).

    Samples that are independent, such as different sizes, add their variances.
    """
    count = len(copies)
    return np.asarray((count - 1) / count * ((copies - copies.mean(axis=0)) ** 2).sum(axis=0))
