"""Every matrix by name, and the two self-adjoint parts a spectrum is taken of."""

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Literal, get_args

import numpy as np
from numpy.typing import NDArray

from conetone.operators.causal import causal_matrix
from conetone.operators.link import link_matrix
from conetone.sprinkle.order import Order

Part = Literal["symmetric", "antisymmetric"]
PARTS: tuple[Part, ...] = get_args(Part)


@dataclass(frozen=True)
class Operator:
    """A matrix of an order.

    `matrix` gives it as float64 of shape (n, n), strictly upper triangular. `square_sum` gives the exact
    sum of its squared entries by another route, which the audit of a spectrum is held against.
    """

    name: str
    matrix: Callable[[Order], NDArray[np.float64]]
    square_sum: Callable[[Order], float]
    meaning: str


OPERATORS: Mapping[str, Operator] = {
    operator.name: operator
    for operator in (
        Operator("causal", causal_matrix, lambda order: float(order.relations), "C: i precedes j"),
        Operator("link", link_matrix, lambda order: float(order.links.pairs), "L: j covers i"),
    )
}
