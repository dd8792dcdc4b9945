"""Finite-size scaling α(n) = α∞ + a n^−ω (+ b n^−ω′), averaged over windows, models, ω and smallest sizes.

Arrays carry a leading axis of copies, so that the jackknife redoes weights, averages and extrapolation:
entry 0 uses all replicates, the others leave out one replicate of one size.
"""

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace
from itertools import combinations, product

import numpy as np
from numpy.typing import NDArray

from conetone.fit.average import information_criterion, weights_of
from conetone.fit.powerlaw import SMALLEST_ERROR

Floats = NDArray[np.float64]

# The ω of the terms of one curve.
Form = tuple[float, ...]
# Gaussian prior of each term a n^−ω at the smallest size: exponents do not move by more between there and
# infinity. It keeps two terms from growing large against each other.
LARGEST_TERM = 0.2
# Share of the way from the largest size to infinity that counts as systematic error; coverage in injections
# outside the model set, which `conetone calibrate` prints, decided it.
WAY_SHARE = 1.0
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


def without_smallest(estimates: SizeEstimates, count: int) -> SizeEstimates:
    """The same series without so many of its smallest sizes; copies keep their places."""
    by_size = ("exponent", "statistical", "misfit", "chi2")
    return replace(
        estimates,
        sizes=estimates.sizes[count:],
        bins_cut=estimates.bins_cut[count:],
        **{name: getattr(estimates, name)[:, count:] for name in by_size},
    )


def only_fitted(estimates: SizeEstimates) -> SizeEstimates:
    """The same series without the sizes at which nothing has a fit."""
    fitted = np.isfinite(estimates.exponent[0]).any(axis=-1)
    by_size = ("exponent", "statistical", "misfit", "chi2")
    return replace(
        estimates,
        sizes=estimates.sizes[fitted],
        bins_cut=estimates.bins_cut[fitted],
        **{name: getattr(estimates, name)[:, fitted] for name in by_size},
    )


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
    `omega_weights` (omegas,), those of a curve with two terms shared by both; `two_terms`, the weight of such
    curves together; `reduced_chi2` of the scaling fits.
    """

    at_sizes: Averages
    weights: Floats
    omega_weights: Floats
    two_terms: float
    reduced_chi2: float
    _largest: float
    _curves: Sequence["_Curves"]
    _curve_weights: Floats  # (copies, curves, candidates)

    def at(self, sizes: Floats) -> Averages:
        """Averaged exponents at sizes on the curve, shape (copies, sizes); ∞ is a size.

        Beyond the largest size the way from its average counts as hidden too: forms of the set agree on it
        more closely than they deserve, as terms outside of it, such as n^−1/4, change it by about as much.
        """
        averages = _average(self._curve_weights, self._curves, sizes)
        way = averages.value - self.at_sizes.value[:, -1:]
        beyond = np.where(sizes > self._largest, (WAY_SHARE * way) ** 2, 0)
        return Averages(averages.value, averages.hidden_variance + beyond)

    @property
    def limit(self) -> Averages:
        """Averaged exponents at infinite size, shape (copies, 1)."""
        return self.at(np.array([np.inf]))


def extrapolate(
    estimates: SizeEstimates, omegas: Sequence[float], most_sizes_cut: int
) -> Extrapolation | None:
    """Average α∞ over windows × models × forms × smallest-size cuts; None with fewer than three usable sizes.

    Each candidate is a curve in one n^−ω or two, weighted by statistical error and misfit together, and
    widened by its own χ²/ν if above 1. Weights: exp(−½[information criterion of the window and model +
    χ² of the curve + 2 × coefficients + 2 × sizes not used]), after Jay & Neil 2021. Copies pass through all
    of it; those in which a curve does not exist give it no weight.
    """
    criterion = _criterion(estimates)  # (copies, candidates)
    curves = list(_curves(estimates, omegas, most_sizes_cut))
    if not curves:
        return None
    total = np.stack([criterion + curve.criterion for curve in curves], axis=1)
    if not np.isfinite(total[0]).any():
        return None
    weights = weights_of(total, axis=(1, 2))  # (copies, curves, candidates)
    reduced = np.stack([curve.chi2[0] / np.maximum(curve.degrees[0], 1) for curve in curves])
    by_curve = weights[0].sum(axis=-1)
    return Extrapolation(
        at_sizes=_average_at_sizes(estimates, criterion),
        weights=weights[0].sum(axis=0),
        omega_weights=np.array(
            [
                sum(
                    weight / len(curve.form)
                    for curve, weight in zip(curves, by_curve, strict=True)
                    if omega in curve.form
                )
                for omega in omegas
            ]
        ),
        two_terms=float(sum(w for curve, w in zip(curves, by_curve, strict=True) if len(curve.form) > 1)),
        reduced_chi2=float(np.nansum(weights[0] * np.where(weights[0] > 0, reduced, 0))),
        _largest=float(estimates.sizes[-1]),
        _curves=curves,
        _curve_weights=weights,
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
class _Curves:
    """Curves α∞ + Σ_k a_k n^−ω_k from one form and one cut; arrays (copies, candidates) unless said."""

    form: Form
    sizes_unused: Floats
    gains: Floats  # of each coefficient: (copies, candidates, terms, sizes)
    coefficients: Floats  # (copies, candidates, terms)
    chi2: Floats
    degrees: Floats
    exists: NDArray[np.bool_]
    statistical_variance: Floats  # (copies, candidates, sizes)
    total_variance: Floats

    @property
    def criterion(self) -> Floats:
        """χ² + 2 coefficients + 2 sizes not used; ∞ where there is no curve."""
        return np.where(self.exists, self.chi2 + 2 * (1 + len(self.form)) + 2 * self.sizes_unused, np.inf)

    def at(self, size: float) -> tuple[Floats, Floats]:
        """Prediction at a size, and the variance beyond the statistical one."""
        terms = _terms(self.form, np.array([size]))[0]
        gain = np.einsum("t,crts->crs", terms, self.gains)
        statistical = (gain**2 * self.statistical_variance).sum(axis=-1)
        total = (gain**2 * self.total_variance).sum(axis=-1)
        widening = np.maximum(self.chi2 / np.maximum(self.degrees, 1), 1)
        return self.coefficients @ terms, np.maximum(widening * total - statistical, 0)


def forms_of(omegas: Sequence[float]) -> list[Form]:
    """One term for every ω, and two terms for every pair."""
    return [(omega,) for omega in omegas] + list(combinations(omegas, 2))


def _terms(form: Form, sizes: Floats) -> Floats:
    """1 and n^−ω for each ω of the form, shape (sizes, 1 + ωs)."""
    return np.stack([np.ones_like(sizes), *(sizes**-omega for omega in form)], axis=-1)


def _curves(estimates: SizeEstimates, omegas: Sequence[float], most_sizes_cut: int) -> Iterator[_Curves]:
    fitted = np.isfinite(estimates.exponent).swapaxes(1, 2)  # (copies, candidates, sizes)
    exponent = np.where(fitted, estimates.exponent.swapaxes(1, 2), 0)
    statistical = np.where(fitted, estimates.statistical.swapaxes(1, 2) ** 2, 0)
    misfit = np.where(fitted, estimates.misfit.swapaxes(1, 2) ** 2, 0)
    # exactly regular orders have no error at all
    total = np.maximum(statistical + misfit, SMALLEST_ERROR**2)
    sizes = len(estimates.sizes)
    for form, cut in product(forms_of(omegas), range(min(most_sizes_cut, sizes - 1) + 1)):
        terms = _terms(form, estimates.sizes)
        used = fitted & (np.arange(sizes) >= cut)
        count = used.sum(axis=-1)
        # without a fit at the last size cut, this is the curve of one cut less again
        again = ~fitted[..., cut - 1] if cut else np.zeros_like(count, dtype=bool)
        # one size more than coefficients, to judge the curve by
        exists = (count >= len(form) + 2) & ~again
        if not exists[0].any():
            continue
        precision = np.where(used, 1 / total, 0)
        weighted = terms.T * precision[..., np.newaxis, :]  # (copies, candidates, terms, sizes)
        prior = np.append(0, terms[0, 1:] / LARGEST_TERM)
        normal = np.where(exists[..., np.newaxis, np.newaxis], weighted @ terms, np.eye(1 + len(form)))
        gains = np.linalg.solve(normal + np.diag(prior**2), weighted)
        coefficients = (gains @ exponent[..., np.newaxis])[..., 0]
        priors = ((coefficients * prior) ** 2).sum(axis=-1)
        residual = exponent - coefficients @ terms.T
        yield _Curves(
            form, sizes - count, gains, coefficients,
            chi2=(precision * residual**2).sum(axis=-1) + priors, degrees=count - 1.0, exists=exists,
            statistical_variance=statistical, total_variance=total,
        )  # fmt: skip


def _average(weights: Floats, curves: Sequence[_Curves], sizes: Floats) -> Averages:
    values, hidden = [], []
    for size in sizes:
        predictions = [curve.at(float(size)) for curve in curves]
        value = np.stack([prediction for prediction, _ in predictions], axis=1)
        variance = np.stack([beyond for _, beyond in predictions], axis=1)
        mean = (weights * value).sum(axis=(1, 2))
        values.append(mean)
        spread = (value - mean[:, np.newaxis, np.newaxis]) ** 2
        hidden.append((weights * (variance + spread)).sum(axis=(1, 2)))
    return Averages(np.stack(values, axis=1), np.stack(hidden, axis=1))
