"""Orders for tests: random ones of every ensemble, and the degenerate ones in which solvers stumble."""

from collections.abc import Iterator

import numpy as np

from conetone.operators.catalogue import SpectralPart
from conetone.sprinkle.catalogue import ENSEMBLES, sprinkle
from conetone.sprinkle.order import Order

# The parts that are matrices with eigenvalues; singular values have tests of their own.
SELF_ADJOINT: tuple[SpectralPart, ...] = ("symmetric", "antisymmetric")


def chain(elements: int) -> Order:
    return Order.from_matrix(np.triu(np.ones((elements, elements), dtype=bool), 1))


def antichain(elements: int) -> Order:
    return Order.from_matrix(np.zeros((elements, elements), dtype=bool))


def complete_bipartite(lower: int, upper: int) -> Order:
    matrix = np.zeros((lower + upper, lower + upper), dtype=bool)
    matrix[:lower, lower:] = True
    return Order.from_matrix(matrix)


def product_of_chains(*lengths: int) -> Order:
    """Tuples, one before another if no coordinate is larger and one is smaller; in lexicographic order."""
    below = np.ones((1, 1), dtype=bool)
    for length in lengths:
        below = np.kron(below, np.triu(np.ones((length, length), dtype=bool)))
    np.fill_diagonal(below, False)
    return Order.from_matrix(below)


def copies(order: Order, number: int) -> Order:
    """Unrelated copies side by side: every eigenvalue is repeated."""
    return Order.from_matrix(np.kron(np.eye(number, dtype=bool), order.relation.dense(np.bool_)))


def degenerate_orders() -> Iterator[Order]:
    """Repeated eigenvalues, low ranks, zero matrices, sizes 0, 1, 2, and about a word and a block."""
    for elements in (0, 1, 2, 3, 63, 64, 65, 129, 200):
        yield chain(elements)
        yield antichain(elements)
    for lower, upper in ((1, 1), (1, 7), (5, 3), (64, 64), (1, 150), (100, 200)):
        yield complete_bipartite(lower, upper)
    for lengths in ((2, 2), (2,) * 7, (3,) * 5, (16, 16), (6, 6, 6), (5, 60)):
        yield product_of_chains(*lengths)
    yield copies(chain(3), 70)
    yield copies(complete_bipartite(2, 3), 40)


def random_orders(number: int, largest: int, seed: int = 0) -> Iterator[Order]:
    """That many orders of every ensemble, with random parameters and sizes from 1 to `largest`."""
    for i in range(number):
        for ensemble in ENSEMBLES.values():
            generator = np.random.default_rng([seed, i])
            parameters = {
                p.name: int(generator.integers(p.minimum, p.maximum + 1)) for p in ensemble.parameters
            }
            yield sprinkle(
                ensemble.name, parameters, int(generator.integers(1, largest, endpoint=True)), generator
            )
