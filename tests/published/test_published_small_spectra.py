"""Spectra that are known in closed form: chains, antichains, complete bipartite orders."""

import numpy as np
import pytest
from tests.orders import SELF_ADJOINT

from conetone.diagonalise.audit import audit
from conetone.diagonalise.full import full_spectrum
from conetone.operators.catalogue import OPERATORS
from conetone.operators.causal import causal_matrix
from conetone.operators.link import link_matrix
from conetone.sprinkle.order import Order

SIZES = [1, 2, 3, 4, 5, 10, 33, 63, 64, 65, 100]


def chain(elements):
    return Order.from_matrix(np.triu(np.ones((elements, elements), dtype=bool), 1))


def antichain(elements):
    return Order.from_matrix(np.zeros((elements, elements), dtype=bool))


def complete_bipartite(lower, upper):
    matrix = np.zeros((lower + upper, lower + upper), dtype=bool)
    matrix[:lower, lower:] = True
    return Order.from_matrix(matrix)


def rounding(expected):
    """n ε ‖A‖ with room for the constant of a backward-stable solver."""
    return 20 * len(expected) * np.finfo(float).eps * max(np.abs(expected).max(initial=0), 1)


@pytest.mark.parametrize("elements", SIZES)
def test_antisymmetric_part_of_the_causal_matrix_of_a_chain(elements):
    # cot((2k − 1)π/(2n)), k = 1 … n. Derived here: i(C − Cᵀ) is a Toeplitz matrix with sign change on
    # wrapping round, so its eigenvectors are exp(i(2k − 1)πj/n). Confirmed numerically.
    k = np.arange(1, elements + 1)
    expected = np.sort(1 / np.tan((2 * k - 1) * np.pi / (2 * elements)))
    found = full_spectrum(causal_matrix(chain(elements)), "antisymmetric").eigenvalues
    np.testing.assert_allclose(found, expected, atol=rounding(expected), rtol=0)


@pytest.mark.parametrize("elements", SIZES)
def test_symmetric_part_of_the_causal_matrix_of_a_chain(elements):
    # the adjacency matrix of the complete graph: n − 1 once, −1 otherwise
    expected = np.array([-1.0] * (elements - 1) + [elements - 1.0])
    found = full_spectrum(causal_matrix(chain(elements)), "symmetric").eigenvalues
    np.testing.assert_allclose(found, expected, atol=rounding(expected), rtol=0)


@pytest.mark.parametrize("part", SELF_ADJOINT)
@pytest.mark.parametrize("elements", SIZES)
def test_link_matrix_of_a_chain(elements, part):
    # the adjacency matrix of a path: 2 cos(kπ/(n + 1)); phases i^j turn one part into the other
    expected = np.sort(2 * np.cos(np.arange(1, elements + 1) * np.pi / (elements + 1)))
    found = full_spectrum(link_matrix(chain(elements)), part).eigenvalues
    np.testing.assert_allclose(found, expected, atol=rounding(expected), rtol=0)


@pytest.mark.parametrize("operator", OPERATORS)
@pytest.mark.parametrize("part", SELF_ADJOINT)
@pytest.mark.parametrize("elements", [0, *SIZES])
def test_antichains_have_only_zeros(elements, part, operator):
    order = antichain(elements)
    found = full_spectrum(OPERATORS[operator].matrix(order), part).eigenvalues
    np.testing.assert_array_equal(found, np.zeros(elements))
    assert audit(found, part, OPERATORS[operator].square_sum(order)).passed


@pytest.mark.parametrize("operator", OPERATORS)
@pytest.mark.parametrize("part", SELF_ADJOINT)
@pytest.mark.parametrize(("lower", "upper"), [(1, 1), (1, 7), (5, 3), (20, 30), (64, 64), (1, 100)])
def test_complete_bipartite_orders(lower, upper, part, operator):
    # C = L is a block of ones with the one singular value √(ab), so both parts have ±√(ab) and zeros.
    order = complete_bipartite(lower, upper)
    expected = np.zeros(lower + upper)
    expected[0], expected[-1] = -np.sqrt(lower * upper), np.sqrt(lower * upper)
    found = full_spectrum(OPERATORS[operator].matrix(order), part).eigenvalues
    np.testing.assert_allclose(found, expected, atol=rounding(expected), rtol=0)
    singular = np.linalg.svd(causal_matrix(order), compute_uv=False)
    np.testing.assert_allclose(singular[0], np.sqrt(lower * upper), rtol=1e-13)
    assert singular[1:].max(initial=0) < rounding(expected)
