"""The causal matrix: C[i, j] = 1 where i precedes j."""

import numpy as np
from numpy.typing import NDArray

from conetone.operators.square import dense_matrix
from conetone.sprinkle.order import Order


def causal_matrix(order: Order) -> NDArray[np.float64]:
    """C as float64 of shape (n, n), strictly upper triangular; C[i, j] = 1 where i precedes j."""
    return dense_matrix(order.relation)
