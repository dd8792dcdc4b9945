"""Amplitudes at infinite size: log(s_r/n) at fixed rank, extrapolated in 1/n.

Why 1/n, and not an unknown power (derived here). Points x_a, n of them, drawn from the region, make a matrix
K(x_a, x_b) = Σ_j μ_j φ_j(x_a) φ_j*(x_b). Its eigenvalues other than 0 are those of n M (1 + ε), M = diag(μ),
with the Gram matrix δ_ij + ε_ij = (1/n) Σ_a φ_i*(x_a) φ_j(x_a), ε_ij of mean 0 and variance c_ij/n. To second
order λ_i/(n μ_i) = 1 + ε_ii + Σ_(j≠i) μ_j |ε_ij|²/(μ_i − μ_j). On average, with a spectrum symmetric about 0,
but for a term const/n that is the same at all ranks,

    E log λ_i = log(n μ_i) + (1/n) Σ_j c_ij 2 μ_j²/(μ_i² − μ_j²):

the leading correction at fixed rank is exactly of order 1/n. With μ_j ∝ j^(−α) and c = 1 it is C(α) r/n,
C = −(π/α) cot(π/2α), the principal value of the sum as an integral: see `finite_size_coefficient`.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import product
from math import pi, tan

import numpy as np
from numpy.typing import NDArray

from conetone.aggregate.resample import variance_of_copies
from conetone.errors import InputError
from conetone.fit.average import weights_of

Floats = NDArray[np.float64]

# Coefficients of the forms averaged over: a straight line in 1/n, and a parabola.
FORMS = (2, 3)
# Fewer replicates have no variance left when one of them is taken away.
FEWEST_REPLICATES = 3


@dataclass(frozen=True)
class Amplitudes:
    """log(s_r/n) at infinite size and its coefficient of 1/n, at each rank: all of shape (ranks,).

    `statistical` are jackknife errors, `systematic` the spread of the forms; NaN at ranks that too few sizes
    have. `two_terms` is the weight of forms with 1/n², `reduced_chi2` the weighted mean of χ²/ν, `copies`
    (copies, ranks) the values without each replicate of each size in turn.
    """

    value: Floats
    statistical: Floats
    systematic: Floats
    coefficient: Floats
    coefficient_statistical: Floats
    coefficient_systematic: Floats
    two_terms: Floats
    reduced_chi2: Floats
    copies: Floats

    def __post_init__(self) -> None:
        for array in vars(self).values():
            array.setflags(write=False)

    @property
    def total(self) -> Floats:
        """Both errors of the values in quadrature."""
        return np.hypot(self.statistical, self.systematic)

    def deviation_from(self, law: Floats) -> Floats:
        """(log(s_r/n) − log law) / total error, in σ, given the law's s_r/n at the same ranks."""
        with np.errstate(divide="ignore", invalid="ignore"):
            return np.asarray((self.value - np.log(law)) / self.total)


def finite_size_coefficient(exponent: float) -> float:
    """C(α) = −(π/α) cot(π/2α) of E log(s_r/n) = log μ_r + C r/n: 0, 2.42, 4.71, 6.92 for 1, 3/4, 2/3, 5/8.

    For α > 1/2, eigenfunctions of constant modulus, a spectrum symmetric about 0: derived here, see above.
    """
    return -pi / exponent / tan(pi / (2 * exponent))


def amplitudes_at_infinite_size(
    sizes: Sequence[int], logs: Sequence[Floats], most_sizes_cut: int
) -> Amplitudes:
    """Extrapolate log(s_r/n) in 1/n, at each rank on its own.

    `logs`: for each size, ascending, the mean of log(s_r/n) over its replicates at each rank, or bin of
    ranks, shape (1 + replicates, ranks): entry 0 of all of them, the others without each in turn; NaN at
    ranks that the size does not have. Averaged over straight lines and parabolas in 1/n and 0 to
    `most_sizes_cut` smallest sizes left out, with weights exp(−½[χ² + 2 coefficients + 2 sizes not used])
    after Jay & Neil 2021. Every copy redoes standard errors, fits and weights. A size needs three
    replicates, a form one size more than coefficients. Raises InputError if sizes do not rise or shapes do
    not match.
    """
    _check(sizes, logs)
    replicates = [len(of_size) - 1 for of_size in logs]
    data, variance = _stacked(logs, replicates)
    x = sizes[0] / np.array(sizes, dtype=np.float64)  # of order one, for the normal equations
    known = np.isfinite(data) & (variance > 0)
    precision = np.divide(1, variance, out=np.zeros_like(variance), where=known)
    data = np.where(known, data, 0)
    fits = [
        _fit(x, data, precision, terms, cut)
        for terms, cut in product(FORMS, range(most_sizes_cut + 1))
        if cut + terms < len(sizes)
    ]
    if not fits:
        fits = [_fit(x, data, precision, FORMS[0], 0)]  # exists nowhere: NaN throughout
    criterion = np.stack([fit.criterion for fit in fits], axis=-1)  # (copies, ranks, forms)
    weights = weights_of(criterion, axis=-1)
    values = np.stack([fit.coefficients for fit in fits], axis=-1)  # (copies, ranks, 2, forms)
    mean = (weights[:, :, np.newaxis] * values).sum(axis=-1)
    spread = (weights[0][:, np.newaxis] * (values[0] - mean[0][..., np.newaxis]) ** 2).sum(axis=-1)
    statistical = np.sqrt(variance_of_copies(mean[1:], replicates))
    units = np.array([1.0, sizes[0]])  # of the value, and of the coefficient of 1/n
    value, coefficient = (mean[0] * units).T
    value_error, coefficient_error = (statistical * units).T
    value_spread, coefficient_spread = (np.sqrt(spread) * units).T
    parabola = np.array([fit.terms > FORMS[0] for fit in fits])
    return Amplitudes(
        value, value_error, value_spread, coefficient, coefficient_error, coefficient_spread,
        two_terms=(weights[0] * parabola).sum(axis=-1),
        reduced_chi2=(weights[0] * np.stack([fit.reduced_chi2 for fit in fits], axis=-1)).sum(axis=-1),
        copies=mean[1:, :, 0],
    )  # fmt: skip


def _check(sizes: Sequence[int], logs: Sequence[Floats]) -> None:
    if not len(sizes) or len(logs) != len(sizes) or not (np.diff(sizes) > 0).all():
        raise InputError("sizes", f"{list(sizes)} with {len(logs)} arrays", "rising numbers, an array each")
    shapes = [np.shape(of_size) for of_size in logs]
    if any(len(shape) != 2 or shape[0] < 1 or shape[1] != shapes[0][-1] for shape in shapes):
        raise InputError("logs", f"arrays of shapes {shapes}", "(1 + replicates, ranks) with the same ranks")


def _stacked(logs: Sequence[Floats], replicates: Sequence[int]) -> tuple[Floats, Floats]:
    """Means and their variances, shape (copies, ranks, sizes): copy 0 uses all, any other misses one."""
    shape = (1 + sum(replicates), logs[0].shape[1], len(logs))
    data, variance = np.empty(shape), np.full(shape, np.nan)
    first = 1
    for s, (of_size, count) in enumerate(zip(logs, replicates, strict=True)):
        data[:, :, s] = of_size[0]
        data[first : first + count, :, s] = of_size[1:]
        if count >= FEWEST_REPLICATES:
            # the replicates less their mean follow from the copies, and from them every variance
            squares = ((count - 1) * (of_size[0] - of_size[1:])) ** 2
            total = squares.sum(axis=0)
            variance[:, :, s] = total / (count * (count - 1))
            without = total - squares * count / (count - 1)
            variance[first : first + count, :, s] = without / ((count - 1) * (count - 2))
        first += count
    return data, variance


@dataclass(frozen=True)
class _Fit:
    """One form: `coefficients` of 1 and of x (copies, ranks, 2), `criterion` and `reduced_chi2`."""

    terms: int
    coefficients: Floats
    criterion: Floats
    reduced_chi2: Floats


def _fit(x: Floats, data: Floats, precision: Floats, terms: int, cut: int) -> _Fit:
    """Weighted least squares for all copies and ranks at once; criterion ∞ where there is no fit."""
    used = np.where(np.arange(len(x)) >= cut, precision, 0)
    count = (used > 0).sum(axis=-1)
    # without the last size that is cut, this is the form of one cut less again
    again = precision[..., cut - 1] == 0 if cut else np.zeros(count.shape, dtype=bool)
    exists = (count > terms) & ~again
    design = x[:, np.newaxis] ** np.arange(terms)
    matrix = np.einsum("crs,si,sj->crij", used, design, design)
    matrix = np.where(exists[..., np.newaxis, np.newaxis], matrix, np.eye(terms))
    right = np.einsum("crs,si,crs->cri", used, design, data)
    coefficients = np.linalg.solve(matrix, right[..., np.newaxis])[..., 0]
    chi2 = (used * (data - coefficients @ design.T) ** 2).sum(axis=-1)
    unused = len(x) - count
    return _Fit(
        terms,
        coefficients[..., :2],
        np.where(exists, chi2 + 2 * terms + 2 * unused, np.inf),
        chi2 / np.maximum(count - terms, 1),
    )
