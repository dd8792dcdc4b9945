"""Quantities derived from several exponents, such as differences and ratios, with all correlations.

Series of one ensemble share their orders, so that their errors are correlated; a jackknife copy leaves an
order out of all of them at once.
"""

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from conetone.fit.resample import jackknife_variance

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class Ingredient:
    """One measured number: value, systematic error, delete-one copies, and the order each leaves out.

    `orders` names for each copy the sample that the order belongs to (ensemble and size) and its replicate.
    """

    value: float
    systematic: float
    copies: Floats
    orders: Sequence[tuple[str, int]]


@dataclass(frozen=True)
class Derived:
    """A derived number with its jackknife error and its systematic error."""

    value: float
    statistical: float
    systematic: float

    @property
    def total(self) -> float:
        """Both errors in quadrature."""
        return float(np.hypot(self.statistical, self.systematic))


def derive(function: Callable[..., float], ingredients: Sequence[Ingredient]) -> Derived:
    """A function of measured numbers: f(value, value, …).

    Statistical: every order is left out of all ingredients that hold it, sample by sample. Systematic: the
    change by each ingredient's systematic error, in quadrature, the larger of up and down.
    """
    values = [each.value for each in ingredients]
    centre = function(*values)
    copies = [dict(zip(each.orders, each.copies.tolist(), strict=True)) for each in ingredients]
    samples: dict[str, list[tuple[str, int]]] = {}
    for order in dict.fromkeys(order for each in copies for order in each):
        samples.setdefault(order[0], []).append(order)
    variance = 0.0
    for orders in samples.values():
        if len(orders) > 1:
            left_out = [
                function(*(copy.get(order, value) for copy, value in zip(copies, values, strict=True)))
                for order in orders
            ]
            variance += float(jackknife_variance(np.array(left_out)))
    systematic = 0.0
    for i, each in enumerate(ingredients):
        moved = [
            function(*values[:i], values[i] + sign * each.systematic, *values[i + 1 :]) - centre
            for sign in (-1, 1)
        ]
        systematic = float(np.hypot(systematic, max(map(abs, moved))))
    return Derived(centre, float(np.sqrt(variance)), systematic)
