"""Every matrix by name, and the parts of it whose spectra are taken and ranked."""

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Literal, get_args

import numpy as np
from numpy.typing import NDArray

from conetone.operators.causal import causal_matrix
from conetone.operators.dominance import DominanceProduct
from conetone.operators.link import link_matrix
from conetone.operators.packed import PackedProduct
from conetone.operators.product import Product
from conetone.sprinkle.dominance import DominanceOrder
from conetone.sprinkle.order import Order

# What is diagonalised of a matrix M: M + Mᵀ, i(M − Mᵀ), and singular values.
SpectralPart = Literal["symmetric", "antisymmetric", "singular"]
SPECTRAL_PARTS: tuple[SpectralPart, ...] = get_args(SpectralPart)
# What is ranked, a series each; both signs of M + Mᵀ are ranked from its one spectrum.
Part = Literal["symmetric", "symmetric-positive", "symmetric-negative", "antisymmetric", "singular"]
PARTS: tuple[Part, ...] = get_args(Part)
_RANKED_FROM: Mapping[Part, SpectralPart] = {
    "symmetric": "symmetric",
    "symmetric-positive": "symmetric",
    "symmetric-negative": "symmetric",
    "antisymmetric": "antisymmetric",
    "singular": "singular",
}

# Orders of points of the plane with more elements than this are multiplied by counting dominated points, in
# n log n steps instead of n². From a table, only orders beyond LARGEST_PACKED come back with their points.
DOMINANCE_ABOVE = 10_000


def spectral_part(part: Part) -> SpectralPart:
    """The part whose spectrum a series is ranked from."""
    return _RANKED_FROM[part]


@dataclass(frozen=True)
class Operator:
    """A matrix of an order.

    `matrix` gives it as float64 of shape (n, n), strictly upper triangular. `product(order, threads)` gives
    it as something to multiply with, in far less memory. `square_sum` gives the exact sum of its squared
    entries by another route, which the audit of a full spectrum is held against.
    """

    name: str
    matrix: Callable[[Order], NDArray[np.float64]]
    product: Callable[[Order, int], Product]
    square_sum: Callable[[Order], float]
    meaning: str


def _causal_product(order: Order, threads: int) -> Product:
    if isinstance(order, DominanceOrder) and order.elements > DOMINANCE_ABOVE:
        return DominanceProduct(*order.light_cone, threads=threads)
    return PackedProduct(order.relation, threads)


def _link_product(order: Order, threads: int) -> Product:
    return PackedProduct(order.links, threads)


OPERATORS: Mapping[str, Operator] = {
    operator.name: operator
    for operator in (
        Operator(
            "causal",
            causal_matrix,
            _causal_product,
            lambda order: float(order.relations),
            "C: i precedes j",
        ),
        Operator(
            "link",
            link_matrix,
            _link_product,
            lambda order: float(order.links.pairs),
            "L: j covers i",
        ),
    )
}
