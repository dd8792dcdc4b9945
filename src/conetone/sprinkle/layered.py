"""Orders in layers, which resemble no spacetime."""

import numpy as np

from conetone.sprinkle.order import Order


def kleitman_rothschild(elements: int, generator: np.random.Generator) -> Order:
    """A random order of the typical kind (Kleitman & Rothschild 1975), three layers of n/4, n/2, n/4.

    Neighbouring layers are related with probability 1/2, bottom and top where an element lies between.
    With n not divisible by 4 the middle layer takes the remainder.
    """
    outer = elements // 4
    middle = elements - 2 * outer
    lower = generator.random((outer, middle)) < 0.5
    upper = generator.random((middle, outer)) < 0.5
    matrix = np.zeros((elements, elements), dtype=bool)
    matrix[:outer, outer : outer + middle] = lower
    matrix[outer : outer + middle, outer + middle :] = upper
    matrix[:outer, outer + middle :] = lower.astype(np.float32) @ upper.astype(np.float32) > 0
    return Order.from_matrix(matrix)
