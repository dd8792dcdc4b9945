"""Layered orders: their structure, exactly, and their random pairs, in standard errors."""

import numpy as np
import pytest

from conetone.sprinkle.layered import kleitman_rothschild

SIZES = [0, 1, 2, 3, 4, 5, 6, 7, 8, 40, 65, 102, 131]


@pytest.mark.parametrize("elements", SIZES)
def test_layers(elements):
    outer = elements // 4
    bottom, middle, top = np.split(np.arange(elements), [outer, elements - outer])
    for seed in range(5):
        order = kleitman_rothschild(elements, np.random.default_rng([elements, seed]))
        matrix = order.relation.dense(np.bool_)
        assert order.elements == elements
        assert order.is_transitive
        assert order.height <= 3
        for layer in (bottom, middle, top):
            assert not matrix[np.ix_(layer, layer)].any()
        for i in bottom:
            for k in top:
                assert matrix[i, k] == any(matrix[i, j] and matrix[j, k] for j in middle)


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_neighbouring_layers_are_related_with_probability_one_half(seed):
    n, outer = 200, 50
    matrix = kleitman_rothschild(n, np.random.default_rng(seed)).relation.dense(np.bool_)
    lower, upper = matrix[:outer, outer:-outer], matrix[outer:-outer, -outer:]
    for block in (lower, upper):
        assert abs(block.mean() - 0.5) < 5 * 0.5 / np.sqrt(block.size)
        # rows and columns are binomial as well: no element is special
        assert np.abs(block.mean(axis=0) - 0.5).max() < 5 * 0.5 / np.sqrt(len(block))
        assert np.abs(block.mean(axis=1) - 0.5).max() < 5 * 0.5 / np.sqrt(block.shape[1])
    agreement = (lower == upper.T).mean()
    assert abs(agreement - 0.5) < 5 * 0.5 / np.sqrt(lower.size)
