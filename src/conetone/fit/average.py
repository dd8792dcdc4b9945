"""Weights of windows and models, after Jay & Neil (2021, arXiv 2008.01069)."""

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]


def information_criterion(chi2: Floats, parameters: Floats, bins_cut: Floats) -> Floats:
    """χ² + 2 k + 2 n_cut of every candidate, averaged over sizes; shape (…, candidates).

    `chi2` and `bins_cut`: (…, sizes, candidates), NaN in `chi2` where a candidate has no fit;
    `parameters`: (candidates,). The mean over sizes, not the sum: windows scale with the size, so the same
    steps recur at every size and are evidence about a window once. A candidate without a fit at the
    largest size (the last) gets +∞.
    """
    criterion = chi2 + 2 * parameters + 2 * bins_cut
    fitted = np.isfinite(criterion)
    mean = np.where(fitted, criterion, 0).sum(axis=-2) / np.maximum(fitted.sum(axis=-2), 1)
    return np.where(fitted[..., -1, :], mean, np.inf)


def weights_of(criterion: Floats, axis: int | tuple[int, ...]) -> Floats:
    """exp(−criterion/2), normalised over the given axes; +∞ means weight 0. NaN if nothing is finite."""
    lowest = criterion.min(axis=axis, keepdims=True)
    with np.errstate(invalid="ignore"):
        raw = np.exp(-(criterion - lowest) / 2)
        return np.asarray(raw / raw.sum(axis=axis, keepdims=True))
