"""Products with the causal matrix of two dimensions against the matrix itself."""

import numpy as np
import pytest

from conetone.operators.causal import causal_matrix
from conetone.operators.dominance import COLUMNS, DominanceProduct
from conetone.sprinkle.minkowski import diamond_points, order_of_points


def random_order(seed):
    """Points of a diamond, or of a small lattice with many equal coordinates and equal points."""
    generator = np.random.default_rng(seed)
    elements = int(generator.integers(0, 200)) if seed % 4 else seed // 4 % 9
    if seed % 2:
        return order_of_points(diamond_points(elements, generator, 2))
    return order_of_points(generator.integers(0, generator.integers(1, 15), (elements, 2)) / 4)


def test_products_with_random_orders():
    for seed in range(600):
        order = random_order(seed)
        generator = np.random.default_rng([seed, 1])
        block = generator.normal(size=(order.elements, int(generator.integers(0, 2 * COLUMNS + 2))))
        matrix = causal_matrix(order)
        product = DominanceProduct(*order.light_cone, threads=1 + seed % 2)
        assert (product.elements, product.threads) == (order.elements, 1 + seed % 2)
        future, past = product.apply(block)
        for found, expected in ((future, matrix @ block), (past, matrix.T @ block)):
            assert found.dtype == np.float64
            assert found.flags.c_contiguous
            assert found.shape == block.shape
            np.testing.assert_allclose(
                found, expected, rtol=0, atol=1e-13 * max(order.elements, 1) ** 0.5 * 5
            )


def test_whole_numbers_are_exact():
    for seed in range(100):
        order = random_order(seed)
        block = np.random.default_rng(seed).integers(-1000, 1000, (order.elements, 5)).astype(float)
        future, past = DominanceProduct(*order.light_cone).apply(block)
        matrix = causal_matrix(order)
        np.testing.assert_array_equal(future, matrix @ block)
        np.testing.assert_array_equal(past, matrix.T @ block)


def test_every_pair_of_equal_coordinates():
    # i before j if u_i ≤ u_j, v_i ≤ v_j and i < j: all points of a 3 × 3 lattice, each twice
    points = np.array([[t, x] for t in range(3) for x in (-1, 0, 1) for _ in range(2)], dtype=float)
    u, v = points[:, 0] - points[:, 1], points[:, 0] + points[:, 1]
    expected = [[float(u[i] <= u[j] and v[i] <= v[j] and i < j) for j in range(18)] for i in range(18)]
    future, past = DominanceProduct(u, v).apply(np.eye(18))
    np.testing.assert_array_equal(future, expected)
    np.testing.assert_array_equal(past, np.transpose(expected))


def test_threads_change_no_bit_and_the_block_stays():
    order = order_of_points(diamond_points(3000, np.random.default_rng(1), 2))
    block = np.random.default_rng(2).normal(size=(3000, 20))
    before = block.copy()
    one = DominanceProduct(*order.light_cone, threads=1).apply(block)
    two = DominanceProduct(*order.light_cone, threads=2).apply(block)
    np.testing.assert_array_equal(one, two)
    np.testing.assert_array_equal(block, before)
    assert block.flags.writeable


def test_sums_over_many_elements():
    # Σ over all pairs, and the bilinear form through either side
    order = order_of_points(diamond_points(50_000, np.random.default_rng(3), 2))
    product = DominanceProduct(*order.light_cone)
    ones = np.ones((order.elements, 1))
    future, past = product.apply(ones)
    assert future.sum() == past.sum() == order.relations
    block = np.random.default_rng(4).normal(size=(order.elements, 2))
    future, past = product.apply(block)
    assert block[:, 0] @ future[:, 1] == pytest.approx(past[:, 0] @ block[:, 1], rel=1e-9)


def test_blocks_of_any_layout():
    order = order_of_points(diamond_points(70, np.random.default_rng(5), 2))
    product = DominanceProduct(*order.light_cone)
    block = np.random.default_rng(6).normal(size=(70, 8))
    expected = product.apply(block)
    read_only = block.copy()
    read_only.setflags(write=False)
    for same in (np.asfortranarray(block), np.repeat(block, 2, axis=1)[:, ::2], read_only):
        np.testing.assert_array_equal(product.apply(same), expected)


def test_what_does_not_fit_is_refused():
    with pytest.raises(ValueError, match="light-cone coordinates"):
        DominanceProduct(np.zeros(3), np.zeros(2))
    with pytest.raises(ValueError, match="finite"):
        DominanceProduct(np.zeros(2), np.array([0.0, np.nan]))
    for shape in [(3,), (4, 2), (3, 2, 1)]:
        with pytest.raises(ValueError, match="for 3 elements"):
            DominanceProduct(np.zeros(3), np.zeros(3)).apply(np.zeros(shape))
