"""Log λ of the replicates of one size along a rank axis: averaged over bins of rank, or at smooth ranks."""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from conetone.fit.smoothcount import SmoothRanks, log_cutoffs
from conetone.fit.windows import RankAxis, RankBins

Floats = NDArray[np.float64]
Estimator = Literal["rank-bins", "smooth-count"]


@dataclass(frozen=True)
class RankedLogs:
    """Log λ at each point of a rank axis, for each replicate; `values` has shape (replicates, points)."""

    axis: RankAxis
    values: Floats

    def __post_init__(self) -> None:
        self.values.setflags(write=False)

    @property
    def mean(self) -> Floats:
        """Mean over replicates, shape (points,)."""
        return np.asarray(self.values.mean(axis=0))

    @property
    def error(self) -> Floats:
        """Standard error of that mean over replicates, shape (points,)."""
        return standard_error(self.values)


def bin_logs(spectra: Sequence[Floats], bins: RankBins) -> RankedLogs:
    """Average log λ over bins of rank; each spectrum falls with rank and reaches beyond the last bin."""
    logs = np.log(np.array([spectrum[: bins.last] for spectrum in spectra]))
    return RankedLogs(bins, bins.average(logs))


def smooth_logs(spectra: Sequence[Floats], ranks: SmoothRanks, *, complete: bool) -> RankedLogs:
    """log Λ at smooth ranks, as `log_cutoffs`; NaN where a spectrum is too short for a rank."""
    return RankedLogs(
        ranks, np.array([log_cutoffs(spectrum, ranks.ranks, complete=complete) for spectrum in spectra])
    )


def standard_error(values: Floats) -> Floats:
    """Standard error of the mean over axis 0, from the sample variance."""
    return np.asarray(values.std(axis=0, ddof=1) / np.sqrt(len(values)))
