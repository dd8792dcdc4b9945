"""The limit of a noise-free sequence by rational functions (Bulirsch & Stoer 1964; Henkel & Schütz 1988).

A diagnostic for orders that are exactly regular, whose replicates are identical. Each column of the tableau
subtracts neighbours of the last and so magnifies whatever noise there is: noisy input is refused.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from conetone.errors import InputError

Floats = NDArray[np.float64]

# Of three entries the column before the last has two, whose difference is the error.
SHORTEST_SEQUENCE = 3
# Errors allowed, relative to the largest value: rounding, a few operations of it;
ROUNDING = 64 * np.finfo(np.float64).eps
# and relative to the last difference of the sequence: ten entries at h = 1/n magnify noise 10³- to 10⁵-fold.
LARGEST_NOISE = 1e-8


@dataclass(frozen=True)
class SequenceLimit:
    """Limit of a sequence for h → 0, in its units.

    `error` is twice the difference of the two entries in the column of the tableau before the last (Henkel &
    Schütz 1988): how far the limit still moves, not a standard error.
    """

    value: float
    error: float


def extrapolate_sequence(
    h: Floats, values: Floats, omega: float, errors: Floats | None = None
) -> SequenceLimit:
    """The limit for h → 0 of values(h) = limit + a h^ω + …, by rational functions of h^ω.

    `h`, positive and falling, for instance 1/n, and `values` have the same shape (m,), m ≥ 3; so have the
    standard `errors` of the values if they have any. Raises InputError if they do not, if an error is above
    rounding, or if there is no finite limit.
    """
    _validate(h, values, omega, errors)
    converged = ROUNDING * np.abs(values).max()
    before, column = np.zeros(len(values) + 1), np.asarray(values, dtype=np.float64)
    for order in range(1, len(values)):
        last_pair = column
        ratio = (h[:-order] / h[order:]) ** omega
        before, column = column, _next_column(before, column, ratio, converged)
    if not np.isfinite([column[0], *last_pair]).all():
        raise InputError(
            "sequence to extrapolate",
            f"a pole at h = 0 of the rational functions through {len(values)} values",
            "a sequence with a finite limit",
            "leave out the first value, or take another ω",
        )
    return SequenceLimit(float(column[0]), float(2 * abs(last_pair[1] - last_pair[0])))


def _next_column(before: Floats, column: Floats, ratio: Floats, converged: float) -> Floats:
    """T_m(i) of T_{m−1}(i), T_{m−1}(i+1) and T_{m−2}(i+1); ∞ at a pole."""
    with np.errstate(divide="ignore", invalid="ignore"):
        step = column[1:] - column[:-1]
        across = column[1:] - before[1:-1]
        inverse = ratio * (1 - step / across) - 1
        following = column[1:] + step / np.where(np.abs(inverse) <= ROUNDING, 0, inverse)
    # neighbours that agree within rounding have arrived: their further differences are noise
    return np.where(np.abs(step) <= converged, column[1:], following)


def _validate(h: Floats, values: Floats, omega: float, errors: Floats | None) -> None:
    place = "sequence to extrapolate"
    count = len(values)
    if count < SHORTEST_SEQUENCE or h.shape != (count,) or values.shape != (count,):
        found = f"{len(h)} steps h and {count} values"
        raise InputError(place, found, f"as many of both, at least {SHORTEST_SEQUENCE}")
    if not (np.isfinite(h).all() and (h > 0).all() and (np.diff(h) < 0).all()):
        raise InputError(f"{place}: h", str(h.tolist()), "positive numbers, each smaller than the last")
    if not np.isfinite(values).all():
        raise InputError(f"{place}: values", str(values.tolist()), "finite numbers")
    if not (np.isfinite(omega) and omega > 0):
        raise InputError(f"{place}: ω", str(omega), "a positive number")
    if errors is None:
        return
    if errors.shape != (count,):
        raise InputError(f"{place}: errors", f"shape {errors.shape}", f"shape {(count,)}, that of the values")
    allowed = max(ROUNDING * np.abs(values).max(), LARGEST_NOISE * abs(values[-1] - values[-2]))
    noisy = np.flatnonzero(~(errors <= allowed))
    if noisy.size:
        raise InputError(
            f"{place}: errors[{noisy[0]}]",
            f"{errors[noisy[0]]:.2g} beside a last difference of {abs(values[-1] - values[-2]):.2g}",
            f"errors of at most {allowed:.2g}, which is rounding",
            "every column of the extrapolation magnifies noise: fit lines in n^−ω instead",
        )
