"""From jackknife copies of the whole chain to a value with a statistical and a systematic error."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from conetone.aggregate.scaling import Averages, SizeEstimates
from conetone.fit.powerlaw import Estimates
from conetone.fit.resample import jackknife_variance

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class Measured:
    """Values with errors, each of shape (points,), and the copies behind them, (copies, points).

    `statistical` is the jackknife error; `systematic` is what windows, models and scaling forms disagree
    by, together with their misfits. Copies come in order of size, then replicate.
    """

    value: Floats
    statistical: Floats
    systematic: Floats
    copies: Floats

    @property
    def total(self) -> Floats:
        """Both errors in quadrature."""
        return np.hypot(self.statistical, self.systematic)


@dataclass(frozen=True)
class Candidate:
    """One window and model of a series: its estimates by size (None where it has no fit).

    `log_rank`: log of the middle rank of the window at the largest size, ∞ where no logarithm can hide.
    """

    parameters: int
    estimates: Sequence[Estimates | None]
    bins_cut: Sequence[int]
    log_rank: float = np.inf


def stack_copies(
    sizes: Sequence[int], replicates: Sequence[int], candidates: Sequence[Candidate]
) -> SizeEstimates:
    """Lay out estimates: copy 0 uses everything, every other copy misses one replicate of one size."""
    copies = 1 + sum(replicates)
    shape = (copies, len(sizes), len(candidates))
    arrays = {name: np.full(shape, np.nan) for name in ("exponent", "statistical", "misfit", "chi2")}
    for c, candidate in enumerate(candidates):
        first = 1
        for s, estimates in enumerate(candidate.estimates):
            if estimates is not None:
                for name, array in arrays.items():
                    values = getattr(estimates, name)
                    array[:, s, c] = values[0]
                    array[first : first + replicates[s], s, c] = values[1:]
            first += replicates[s]
    return SizeEstimates(
        sizes=np.array(sizes, dtype=np.float64),
        bins_cut=np.array([candidate.bins_cut for candidate in candidates], dtype=np.float64).T,
        parameters=np.array([candidate.parameters for candidate in candidates], dtype=np.float64),
        **arrays,
    )


def measure(averages: Averages, replicates: Sequence[int]) -> Measured:
    """Errors of averages whose copies are laid out by `stack_copies`."""
    copies = averages.value[1:]
    return Measured(
        value=averages.value[0],
        statistical=np.sqrt(variance_of_copies(copies, replicates)),
        systematic=np.sqrt(averages.hidden_variance[0]),
        copies=copies,
    )


def variance_of_copies(copies: Floats, replicates: Sequence[int]) -> Floats:
    """Jackknife variance of (copies, …) in order of size, then replicate: sizes are independent samples."""
    variance = np.zeros(copies.shape[1:])
    for part in np.split(copies, np.cumsum(replicates)[:-1]):
        if len(part) > 1:
            variance += jackknife_variance(part)
    return variance
