"""One series from its fits at every size to its exponent at infinite size, by either estimator."""

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from conetone.aggregate.resample import Candidate, Measured, measure, stack_copies, variance_of_copies
from conetone.aggregate.scaling import (
    SMALLEST_NUMBER_OF_SIZES,
    Averages,
    Extrapolation,
    SizeEstimates,
    average_at_sizes,
    extrapolate,
    only_fitted,
)
from conetone.fit.models import MODELS
from conetone.fit.size import SizeFits, WindowSettings

Floats = NDArray[np.float64]

# Standard deviation of q in a factor (log r)^q that the law may hold unseen: it moves exponents by q/log r,
# nearly as much at every rank of a window, so that no χ² and no other window tells. Injections of such
# factors decided it.
HIDDEN_LOGARITHM = 0.014


@dataclass(frozen=True)
class SeriesExponent:
    """What one estimator makes of a series; copies come in order of size, then replicate.

    `at_sizes` has one entry a size, NaN where there is no fit. Without an extrapolation `found` and `limit`
    are None, for the `reason` given. `hidden` is what a logarithm unseen may move the exponent by.
    """

    sizes: tuple[int, ...]
    replicates: tuple[int, ...]
    estimates: SizeEstimates
    at_sizes: Measured
    found: Extrapolation | None
    limit: Measured | None
    hidden: float = 0.0
    reason: str | None = None

    @property
    def fitted_sizes(self) -> tuple[int, ...]:
        """The sizes at which any window and model has a fit."""
        fitted = np.isfinite(self.estimates.exponent[0]).any(axis=-1)
        return tuple(size for size, has in zip(self.sizes, fitted, strict=True) if has)

    def curve(self, sizes: Floats) -> Measured:
        """The averaged exponent at sizes on the curve, ∞ among them; raises ValueError without one."""
        if self.found is None:
            raise ValueError(self.reason)
        return _widened(measure(self.found.at(sizes), self.replicates), self.hidden)


def series_exponent(
    sizes: Sequence[int],
    replicates: Sequence[int],
    candidates: Sequence[Candidate],
    omegas: Sequence[float],
    most_sizes_cut: int,
) -> SeriesExponent:
    """Extrapolate the candidates of one series; at least one of them has a fit."""
    estimates = stack_copies(sizes, replicates, candidates)
    # a size that only the other estimator fits is none of this one
    kept = only_fitted(estimates)
    found = extrapolate(kept, omegas, most_sizes_cut)
    averages = _at_all(average_at_sizes(kept), np.isin(estimates.sizes, kept.sizes))
    logs = np.array([candidate.log_rank for candidate in candidates])
    hidden = HIDDEN_LOGARITHM * float((found.weights / logs).sum()) if found else 0.0
    return SeriesExponent(
        tuple(sizes),
        tuple(replicates),
        estimates,
        at_sizes=measure(averages, replicates),
        found=found,
        limit=_widened(measure(found.limit, replicates), hidden) if found else None,
        hidden=hidden,
        reason=None if found else _why_not(estimates),
    )


def _at_all(averages: Averages, fitted: NDArray[np.bool_]) -> Averages:
    """Averages of some sizes laid out over all of them, NaN elsewhere."""
    shape = (len(averages.value), len(fitted))
    value, hidden = np.full(shape, np.nan), np.full(shape, np.nan)
    value[:, fitted], hidden[:, fitted] = averages.value, averages.hidden_variance
    return Averages(value, hidden)


def _widened(measured: Measured, systematic: float) -> Measured:
    return replace(measured, systematic=np.hypot(measured.systematic, systematic))


def _why_not(estimates: SizeEstimates) -> str:
    usable = int(np.isfinite(estimates.exponent[0]).any(axis=-1).sum())
    if usable >= SMALLEST_NUMBER_OF_SIZES:
        return f"no window has fits at {SMALLEST_NUMBER_OF_SIZES} sizes, the largest among them"
    return f"{usable} usable sizes; extrapolation takes {SMALLEST_NUMBER_OF_SIZES}"


def candidates_of(fits: Sequence[SizeFits], settings: WindowSettings) -> list[Candidate]:
    """Every window and model with its estimates by size."""
    found = []
    largest = fits[-1].size
    for rule, model in settings.candidates:
        by_size = [size.fits.get((rule, model)) for size in fits]
        found.append(
            Candidate(
                MODELS[model].parameters,
                [fit.estimates if fit else None for fit in by_size],
                [fit.bins_cut if fit else 0 for fit in by_size],
                rule.log_rank(largest),
            )
        )
    return found


def deviation_between(quoted: Measured, other: Measured, replicates: Sequence[int]) -> float:
    """(other − quoted) in its error: jackknife of the difference, both systematic errors in quadrature.

    Both are measured on the same replicates, whose copies are laid out alike.
    """
    variance = variance_of_copies((other.copies - quoted.copies)[:, 0], replicates)
    total = np.sqrt(variance + quoted.systematic[0] ** 2 + other.systematic[0] ** 2)
    return float((other.value[0] - quoted.value[0]) / total) if total > 0 else 0.0
