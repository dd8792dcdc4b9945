"""Room for a square matrix, laid out so that columns do not fall on one another in the cache."""

import numpy as np
from numpy.typing import NDArray

from conetone.sprinkle.relation import PackedRelation

# Entries in one cache line of 64 bytes.
LINE = 8


def zero_matrix(elements: int) -> NDArray[np.float64]:
    """Zeros of shape (n, n), float64, rows an odd number of cache lines apart.

    Rows a multiple of 4096 bytes apart, as at n = 1024 or 4096, share the same sets of a cache: dense
    solvers then take a third longer.
    """
    lines = -(-elements // LINE) | 1
    return np.zeros((elements, LINE * lines))[:, :elements]


def dense_matrix(relation: PackedRelation) -> NDArray[np.float64]:
    """A packed relation as such a matrix: ones where i → j."""
    matrix = zero_matrix(relation.elements)
    for start, rows in relation.row_groups():
        matrix[start : start + len(rows)] = rows
    return matrix
