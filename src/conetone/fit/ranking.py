"""Which eigenvalues are ranked, and their average over bins of rank."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from conetone.fit.windows import RankBins
from conetone.operators.catalogue import Part

Floats = NDArray[np.float64]


def ranked_magnitudes(
    eigenvalues: Floats, part: Part, *, count: int | None = None, tolerance: float = 0.0
) -> Floats:
    """Magnitudes in falling order, rank 1 first.

    Of an antisymmetric part, whose spectrum is ±, the positive eigenvalues; of a symmetric part all
    magnitudes. Values that are zero to rounding, below n ε times the largest, or not above `tolerance` times
    the largest, are left out.

    With `count`, the eigenvalues are only the `count` largest of each sign. Magnitudes are then ranked as far
    as none can be missing: down to the smallest of each sign that has `count` of them.
    """
    positive = np.sort(eigenvalues[eigenvalues > 0])[::-1]
    negative = np.sort(-eigenvalues[eigenvalues < 0])[::-1]
    if part == "antisymmetric":
        magnitudes = positive[:count]
    else:
        complete = max(_smallest_known(positive, count), _smallest_known(negative, count))
        magnitudes = np.sort(np.concatenate([positive, negative]))[::-1]
        magnitudes = magnitudes[magnitudes >= complete]
    level = max(len(eigenvalues) * np.finfo(np.float64).eps, tolerance) * magnitudes[:1].sum()
    return np.asarray(magnitudes[magnitudes > level])


def _smallest_known(falling: Floats, count: int | None) -> float:
    """Down to where one sign is complete: of a sign with fewer than `count` values there are no others."""
    return 0.0 if count is None or len(falling) < count else float(falling[count - 1])


@dataclass(frozen=True)
class BinnedLogs:
    """Mean of log λ over each bin of rank, for each replicate.

    `values` has shape (replicates, bins); `bins` says which ranks each bin holds.
    """

    bins: RankBins
    values: Floats

    def __post_init__(self) -> None:
        self.values.setflags(write=False)

    @property
    def mean(self) -> Floats:
        """Mean over replicates, shape (bins,)."""
        return np.asarray(self.values.mean(axis=0))

    @property
    def error(self) -> Floats:
        """Standard error of that mean over replicates, shape (bins,)."""
        return standard_error(self.values)


def bin_logs(spectra: list[Floats], bins: RankBins) -> BinnedLogs:
    """Average log λ over bins of rank; each spectrum falls with rank and reaches beyond the last bin."""
    logs = np.log(np.array([spectrum[: bins.last] for spectrum in spectra]))
    return BinnedLogs(bins, bins.average(logs))


def standard_error(values: Floats) -> Floats:
    """Standard error of the mean over axis 0, from the sample variance."""
    return np.asarray(values.std(axis=0, ddof=1) / np.sqrt(len(values)))
