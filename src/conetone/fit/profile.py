"""Whole spectra for the eye: mean log magnitude by rank, and the local slope."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from conetone.fit.logs import Floats, bin_logs, standard_error
from conetone.fit.windows import bins_of_spectrum


@dataclass(frozen=True)
class Profile:
    """Binned spectrum over all ranks; all arrays have shape (bins,).

    `rank` is the geometric mean rank of a bin, `log_magnitude` the mean of log λ. `slope` is
    −Δ log λ / Δ log r between this bin and the next, at `slope_rank`; the last bin has none (NaN).
    """

    rank: Floats
    log_magnitude: Floats
    log_magnitude_error: Floats
    slope_rank: Floats
    slope: Floats
    slope_error: Floats


def profile(spectra: list[NDArray[np.float64]], bins: int) -> Profile:
    """The profile of falling spectra of one size, over the ranks they all have."""
    shared = min(len(spectrum) for spectrum in spectra)
    data = bin_logs(spectra, bins_of_spectrum(shared, bins))
    log_rank = data.axis.of(np.log)
    slopes = -np.diff(data.values, axis=1) / np.diff(log_rank)
    return Profile(
        rank=np.exp(log_rank),
        log_magnitude=data.mean,
        log_magnitude_error=data.error,
        slope_rank=_one_short(np.exp((log_rank[1:] + log_rank[:-1]) / 2)),
        slope=_one_short(slopes.mean(axis=0)),
        slope_error=_one_short(standard_error(slopes)),
    )


def _one_short(values: Floats) -> Floats:
    return np.append(values, np.nan)
