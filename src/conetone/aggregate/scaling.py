"""Finite-size scaling α(n) = α∞ + a n^−ω, averaged over windows, models, ω and smallest sizes.

Arrays carry a leading axis of copies, so that the jackknife redoes weights, averages and extrapolation:
entry 0 uses all replicates, the others leave out one replicate of one size.
"""

from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from conetone.fit.average import information_criterion, weights_of

Floats = NDArray[np.float64]

# A straight line through fewer sizes leaves nothing to judge it by.
SMALLEST_NUMBER_OF_SIZES = 3


@dataclass(frozen=True)
class SizeEstimates:
    """Exponents of one series: every candidate (window and model) at every size.

    `exponent`, `statistical`, `misfit`, `chi2` have shape (copies, sizes, candidates), NaN where there is no
    fit; `bins_cut` (sizes, candidates); `parameters` (candidates,); `sizes` ascending.
    """

    sizes: Floats
    exponent: Floats
    statistical: Floats
    misfit: Floats
    chi2: Floats
    bins_cut: Floats
    parameters: Floats


@dataclass(frozen=True)
class Averages:
    """A model average and the variance it hides: spread between candidates, and their misfits.

    `value` and `hidden_variance` have shape (copies, points).
    """

    value: Floats
    hidden_variance: Floats


@dataclass(frozen=True)
class Extrapolation:
    """Exponents at infinite size and along the way.

    `at_sizes`: window and model averages at each size. `weights` (candidates,) of windows and models,
    `omega_weights` (omegas,), `reduced_chi2` of the scaling fits.
    """

    at_sizes: Averages
    weights: Floats
    omega_weights: Floats
    reduced_chi2: float
    _lines: Sequence["_Lines"]
    _line_weights: Floats  # (copies, lines, candidates)

    def at(self, sizes: Floats) -> Averages:
        """Averaged exponents at sizes on the curve, shape (copies, sizes); ∞ is a size."""
        return _average(self._line_weights, self._lines, sizes)

    @property
    def limit(self) -> Averages:
        """Averaged exponents at infinite size, shape (copies, 1)."""
        return self.at(np.array([np.inf]))


def extrapolate(
    estimates: SizeEstimates, omegas: Sequence[float], most_sizes_cut: int
) -> Extrapolation | None:
    """Average α∞ over windows × models × ω × smallest-size cuts; None with fewer than three usable sizes.

    Each candidate is a straight line in n^−ω, weighted by statistical error and misfit together, and
    widened by its own χ²/ν if above 1. Weights: exp(−½[information criterion of the window and model +
    χ² of the line + 2 × sizes not used]), after Jay & Neil 2021. Copies pass through all of it.
    """
    criterion = _criterion(estimates)  # (copies, candidates)
    lines = list(_lines(estimates, omegas, most_sizes_cut))
    if not lines:
        return None
    total = np.stack([criterion + line.chi2 + 2 * line.sizes_unused for line in lines], axis=1)
    # copies in which a line does not exist give it no weight
    exists = np.stack([line.exists for line in lines], axis=1)
    total = np.where(exists, total, np.inf)
    if not np.isfinite(total[0]).any():
        return None
    weights = weights_of(total, axis=(1, 2))  # (copies, lines, candidates)
    reduced = np.stack([line.chi2[0] / np.maximum(line.degrees[0], 1) for line in lines])
    return Extrapolation(
        at_sizes=_average_at_sizes(estimates, criterion),
        weights=weights[0].sum(axis=0),
        omega_weights=np.array(
            [
                sum(weights[0, i].sum() for i, line in enumerate(lines) if line.omega == omega)
                for omega in omegas
            ]
        ),
        reduced_chi2=float(np.nansum(weights[0] * np.where(weights[0] > 0, reduced, 0))),
        _lines=lines,
        _line_weights=weights,
    )


def average_at_sizes(estimates: SizeEstimates) -> Averages:
    """Window and model averages at each size, for series with too few sizes to extrapolate."""
    return _average_at_sizes(estimates, _criterion(estimates))


def _criterion(estimates: SizeEstimates) -> Floats:
    return information_criterion(estimates.chi2, estimates.parameters, estimates.bins_cut)


def _average_at_sizes(estimates: SizeEstimates, criterion: Floats) -> Averages:
    by_size = np.where(np.isfinite(estimates.exponent), criterion[:, np.newaxis, :], np.inf)
    weights = np.nan_to_num(weights_of(by_size, axis=-1))  # a size with no fit at all: zeros
    exponent, misfit = np.nan_to_num(estimates.exponent), np.nan_to_num(estimates.misfit)
    value = (weights * exponent).sum(axis=-1)
    hidden = (weights * (misfit**2 + (exponent - value[..., np.newaxis]) ** 2)).sum(axis=-1)
    empty = weights.sum(axis=-1) == 0
    return Averages(np.where(empty, np.nan, value), np.where(empty, np.nan, hidden))


@dataclass(frozen=True)
class _Lines:
    """Straight lines in n^−ω from one ω and one cut; arrays of shape (copies, candidates) unless said."""

    omega: float
    sizes_unused: Floats
    gains: tuple[Floats, Floats]  # intercept, slope: (copies, sizes, candidates)
    intercept: Floats
    slope: Floats
    chi2: Floats
    degrees: Floats
    exists: NDArray[np.bool_]
    statistical_variance: Floats  # (copies, sizes, candidates)
    total_variance: Floats

    def at(self, size: float) -> tuple[Floats, Floats]:
        """Prediction at a size, and the variance beyond the statistical one."""
        x = size**-self.omega
        gain = self.gains[0] + x * self.gains[1]
        statistical = (gain**2 * self.statistical_variance).sum(axis=1)
        total = (gain**2 * self.total_variance).sum(axis=1)
        widening = np.maximum(self.chi2 / np.maximum(self.degrees, 1), 1)
        return self.intercept + x * self.slope, np.maximum(widening * total - statistical, 0)


def _lines(estimates: SizeEstimates, omegas: Sequence[float], most_sizes_cut: int) -> Iterator[_Lines]:
    fitted = np.isfinite(estimates.exponent)
    exponent = np.where(fitted, estimates.exponent, 0)
    statistical = np.where(fitted, estimates.statistical**2, 0)
    total = np.where(fitted, estimates.statistical**2 + estimates.misfit**2, 0)
    for omega in omegas:
        x = (estimates.sizes**-omega)[:, np.newaxis]
        for cut in range(most_sizes_cut + 1):
            used = fitted & (np.arange(len(x)) >= cut)[:, np.newaxis]
            count = used.sum(axis=1)
            # without a fit at the last size cut, this is the line of one cut less again
            again = ~fitted[:, cut - 1] if cut else np.zeros_like(count, dtype=bool)
            exists = (count >= SMALLEST_NUMBER_OF_SIZES) & ~again
            if not exists[0].any():
                continue
            precision = np.divide(1, total, out=np.zeros_like(total), where=used & (total > 0))
            s0, s1, s2 = (np.sum(precision * x**k, axis=1, keepdims=True) for k in range(3))
            determinant = np.where(exists[:, np.newaxis], s0 * s2 - s1**2, 1)
            gain0 = precision * (s2 - s1 * x) / determinant
            gain1 = precision * (s0 * x - s1) / determinant
            intercept, slope = (gain0 * exponent).sum(axis=1), (gain1 * exponent).sum(axis=1)
            residual = exponent - intercept[:, np.newaxis] - slope[:, np.newaxis] * x
            yield _Lines(
                omega, len(x) - count, (gain0, gain1), intercept, slope,
                chi2=(precision * residual**2).sum(axis=1), degrees=count - 2.0, exists=exists,
                statistical_variance=statistical, total_variance=total,
            )  # fmt: skip


def _average(weights: Floats, lines: Sequence[_Lines], sizes: Floats) -> Averages:
    values, hidden = [], []
    for size in sizes:
        predictions = [line.at(float(size)) for line in lines]
        value = np.stack([prediction for prediction, _ in predictions], axis=1)
        variance = np.stack([beyond for _, beyond in predictions], axis=1)
        mean = (weights * value).sum(axis=(1, 2))
        values.append(mean)
        spread = (value - mean[:, np.newaxis, np.newaxis]) ** 2
        hidden.append((weights * (variance + spread)).sum(axis=(1, 2)))
    return Averages(np.stack(values, axis=1), np.stack(hidden, axis=1))
