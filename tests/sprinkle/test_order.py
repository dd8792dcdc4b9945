"""Orders: links, height, transitivity and digest against plain implementations."""

from itertools import combinations

import numpy as np
import pytest

from conetone.sprinkle.catalogue import ENSEMBLES, sprinkle
from conetone.sprinkle.order import Order
from conetone.sprinkle.relation import PackedRelation

SIZES = (0, 1, 2, 3, 20, 63, 64, 65, 100)


def transitive_closure(matrix):
    """Warshall's algorithm."""
    closed = matrix.copy()
    for k in range(len(closed)):
        closed |= closed[:, k, np.newaxis] & closed[k]
    return closed


def random_orders():
    """Random matrices, closed: sparse ones are tall and thin, dense ones are nearly chains."""
    for seed, elements in enumerate(SIZES):
        for density in (0.0, 0.02, 0.1, 0.4, 1.0):
            generator = np.random.default_rng([seed, round(100 * density)])
            matrix = np.triu(generator.random((elements, elements)) < density, 1)
            yield transitive_closure(matrix)
    for ensemble in ENSEMBLES.values():
        generator = np.random.default_rng(7)
        parameters = {parameter.name: parameter.minimum + 1 for parameter in ensemble.parameters}
        for elements in SIZES:
            yield sprinkle(ensemble.name, parameters, elements, generator).relation.dense(np.bool_)


def plain_links(matrix):
    links = matrix.copy()
    for i, j in np.argwhere(matrix):
        links[i, j] = not (matrix[i] & matrix[:, j]).any()
    return links


def plain_height(matrix):
    heights = []
    for j in range(len(matrix)):
        heights.append(1 + max((heights[i] for i in range(j) if matrix[i, j]), default=0))
    return max(heights, default=0)


def test_links_height_and_relations():
    for matrix in random_orders():
        order = Order.from_matrix(matrix)
        np.testing.assert_array_equal(order.links.dense(np.bool_), plain_links(matrix))
        assert order.height == plain_height(matrix)
        assert order.relations == matrix.sum()
        assert order.elements == len(matrix)
        assert order.is_transitive
        # an order is the closure of its links
        np.testing.assert_array_equal(transitive_closure(order.links.dense(np.bool_)), matrix)


@pytest.mark.parametrize("elements", [256, 257, 300, 520])
def test_links_of_orders_longer_than_one_block_of_rows(elements):
    generator = np.random.default_rng(elements)
    matrix = transitive_closure(np.triu(generator.random((elements, elements)) < 0.02, 1))
    np.testing.assert_array_equal(Order.from_matrix(matrix).links.dense(np.bool_), plain_links(matrix))


def test_a_missing_transitive_pair_is_noticed_wherever_it_is():
    for elements in (3, 66, 300):
        matrix = np.triu(np.ones((elements, elements), dtype=bool), 1)
        for seed in range(10):
            i, j, k = sorted(np.random.default_rng(seed).choice(elements, 3, replace=False))
            broken = matrix.copy()
            broken[i, k] = False
            assert not Order.from_matrix(broken).is_transitive, (i, j, k)
        neighbours = matrix.copy()
        neighbours[0, 1] = False  # nothing lies between: still an order
        assert Order.from_matrix(neighbours).is_transitive


def test_ordering_fraction():
    for matrix in random_orders():
        fraction = Order.from_matrix(matrix).ordering_fraction
        pairs = list(combinations(range(len(matrix)), 2))
        if pairs:
            assert fraction == pytest.approx(sum(bool(matrix[pair]) for pair in pairs) / len(pairs))
        else:
            assert np.isnan(fraction)


def test_the_digest_changes_with_any_pair():
    # the relation need not be transitive for this
    elements = 67
    matrix = np.triu(np.random.default_rng(1).random((elements, elements)) < 0.5, 1)
    digests = {Order.from_matrix(matrix).digest}
    pairs = list(combinations(range(elements), 2))
    for pair in pairs:
        matrix[pair] ^= True
        digests.add(Order.from_matrix(matrix).digest)
        matrix[pair] ^= True
    assert len(digests) == 1 + len(pairs)


def test_the_digest_is_of_the_order_and_nothing_else():
    matrix = np.triu(np.random.default_rng(2).random((80, 80)) < 0.5, 1)
    order = Order.from_matrix(matrix)
    again = Order(PackedRelation.from_bytes(80, order.relation.to_bytes()))
    assert again is not order
    assert again.digest == order.digest
    # antichains differ in nothing but their number of elements
    antichains = [Order.from_matrix(np.zeros((n, n), dtype=bool)).digest for n in range(130)]
    assert len(set(antichains)) == len(antichains)
