"""Matrices of an order against their definitions, entry by entry."""

import numpy as np
import pytest

from conetone.operators.catalogue import OPERATORS, PARTS, SPECTRAL_PARTS, spectral_part
from conetone.operators.causal import causal_matrix
from conetone.operators.link import link_matrix
from conetone.sprinkle.catalogue import ENSEMBLES, sprinkle


def random_orders():
    """Orders of every ensemble, of 0 to 80 elements."""
    for ensemble in ENSEMBLES.values():
        for seed in range(25):
            generator = np.random.default_rng(seed)
            parameters = {
                p.name: int(generator.integers(p.minimum, p.maximum + 1)) for p in ensemble.parameters
            }
            yield sprinkle(ensemble.name, parameters, int(generator.integers(0, 81)), generator)


def plain_causal(order):
    """From the stored bytes alone: bit j − 64 (i // 64) of the words of row i."""
    n = order.elements
    bits = "".join(f"{byte:08b}"[::-1] for byte in order.relation.to_bytes())
    matrix, position = np.zeros((n, n)), 0
    for i in range(n):
        first = 64 * (i // 64)
        for j in range(i + 1, n):
            matrix[i, j] = bits[position + j - first] == "1"
        position += 64 * (-(-n // 64) - i // 64)
    return matrix


def test_causal_matrix():
    for order in random_orders():
        np.testing.assert_array_equal(causal_matrix(order), plain_causal(order))


def test_link_matrix():
    for order in random_orders():
        causal = plain_causal(order)
        between = [[(causal[i] * causal[:, j]).sum() for j in range(len(causal))] for i in range(len(causal))]
        expected = causal * (np.array(between).reshape(causal.shape) == 0)
        np.testing.assert_array_equal(link_matrix(order), expected)


@pytest.mark.parametrize("operator", OPERATORS.values(), ids=list(OPERATORS))
def test_every_matrix_of_the_catalogue(operator):
    for order in random_orders():
        matrix = operator.matrix(order)
        assert matrix.dtype == np.float64
        assert matrix.shape == (order.elements, order.elements)
        np.testing.assert_array_equal(matrix, np.triu(matrix, 1))
        assert operator.square_sum(order) == (matrix**2).sum()


def test_names():
    assert all(operator.name == name for name, operator in OPERATORS.items())


def test_every_series_is_ranked_from_one_spectrum():
    assert SPECTRAL_PARTS == ("symmetric", "antisymmetric", "singular")
    assert [spectral_part(part) for part in SPECTRAL_PARTS] == list(SPECTRAL_PARTS)
    assert {part: spectral_part(part) for part in PARTS if part not in SPECTRAL_PARTS} == {
        "symmetric-positive": "symmetric",
        "symmetric-negative": "symmetric",
    }
