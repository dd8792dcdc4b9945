"""The link matrix: the transitive reduction of the causal matrix."""

import numpy as np
from numpy.typing import NDArray

from conetone.operators.square import dense_matrix
from conetone.sprinkle.order import Order


def link_matrix(order: Order) -> NDArray[np.float64]:
    """L as float64 of shape (n, n), strictly upper triangular; L[i, j] = 1 where j covers i."""
    return dense_matrix(order.links)
