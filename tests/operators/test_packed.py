"""Products with the packed matrix against the dense one."""

from itertools import chain as chained

import numpy as np
import pytest
from tests.orders import degenerate_orders, random_orders

from conetone.operators.packed import ROWS, WIDTH, PackedProduct
from conetone.sprinkle.relation import PackedRelation


def random_relation(elements, density, seed):
    generator = np.random.default_rng(seed)
    return np.triu(generator.random((elements, elements)) < density, 1), generator


def assert_products(relation, columns, generator, threads=1):
    matrix = relation.dense(np.float64)
    block = generator.standard_normal((relation.elements, columns))
    forward, backward = PackedProduct(relation, threads).apply(block)
    tolerance = 8 * np.finfo(float).eps * relation.elements
    np.testing.assert_allclose(forward, matrix @ block, atol=tolerance, rtol=0)
    np.testing.assert_allclose(backward, matrix.T @ block, atol=tolerance, rtol=0)


def test_equal_the_dense_products_on_hundreds_of_orders():
    generator = np.random.default_rng(1)
    for i, order in enumerate(chained(random_orders(60, 300), degenerate_orders())):
        assert_products(order.relation, 1 + i % (2 * WIDTH + 1), generator)


@pytest.mark.parametrize("density", [0.0, 0.01, 0.5, 1.0])
@pytest.mark.parametrize("elements", [511, 512, 513, 1100, ROWS + 70])
def test_across_cache_lines_parts_and_rows(elements, density):
    matrix, generator = random_relation(elements, density, elements)
    assert_products(PackedRelation.from_matrix(matrix), 3, generator, threads=2)


def test_the_number_of_threads_changes_no_bit():
    matrix, generator = random_relation(1500, 0.2, 5)
    relation, block = PackedRelation.from_matrix(matrix), generator.standard_normal((1500, 10))
    one = PackedProduct(relation, 1).apply(block)
    for threads in (2, 3, 16):
        many = PackedProduct(relation, threads).apply(block)
        for expected, found in zip(one, many, strict=True):
            assert expected.tobytes() == found.tobytes()
