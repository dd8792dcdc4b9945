"""Exact rules run over every partial order of up to five elements."""

from itertools import combinations, permutations, product
from math import factorial

import numpy as np
import pytest
from tests.orders import SELF_ADJOINT

from conetone.diagonalise.audit import audit
from conetone.diagonalise.full import full_spectrum
from conetone.operators.catalogue import OPERATORS
from conetone.operators.causal import causal_matrix
from conetone.operators.link import link_matrix
from conetone.sprinkle.order import Order

# OEIS A000112, unlabelled; A001035, labelled; A006455, naturally labelled (from memory).
UNLABELLED = {0: 1, 1: 1, 2: 2, 3: 5, 4: 16, 5: 63}
LABELLED = {0: 1, 1: 1, 2: 3, 3: 19, 4: 219, 5: 4231}
NATURALLY_LABELLED = {0: 1, 1: 1, 2: 2, 3: 7, 4: 40, 5: 357}


def upper_triangular(elements):
    """Every strictly upper triangular boolean matrix."""
    pairs = list(combinations(range(elements), 2))
    for bits in product((False, True), repeat=len(pairs)):
        matrix = np.zeros((elements, elements), dtype=bool)
        for (i, j), bit in zip(pairs, bits, strict=True):
            matrix[i, j] = bit
        yield matrix


def transitive(matrix):
    """By definition, over every triple."""
    triples = product(range(len(matrix)), repeat=3)
    return all(matrix[i, k] for i, j, k in triples if matrix[i, j] and matrix[j, k])


def natural_labellings(elements):
    return [matrix for matrix in upper_triangular(elements) if transitive(matrix)]


ORDERS = {elements: natural_labellings(elements) for elements in range(6)}
EVERY = [matrix for matrices in ORDERS.values() for matrix in matrices]


def relabelled(matrix):
    """The matrix under every permutation of the elements, as bytes; each only once."""
    return frozenset(
        matrix[np.ix_(permutation, permutation)].tobytes()
        for permutation in map(list, permutations(range(len(matrix))))
    )


@pytest.mark.parametrize("elements", ORDERS)
def test_the_enumeration_is_complete(elements):
    classes = {relabelled(matrix) for matrix in ORDERS[elements]}
    assert len(ORDERS[elements]) == NATURALLY_LABELLED[elements]
    assert len(classes) == UNLABELLED[elements]
    assert sum(len(labellings) for labellings in classes) == LABELLED[elements]
    # by the orbit theorem each class has n! over its number of automorphisms labellings
    assert all(factorial(elements) % len(labellings) == 0 for labellings in classes)


def test_transitivity_is_recognised():
    for elements in range(6):
        for matrix in upper_triangular(elements):
            assert Order.from_matrix(matrix).is_transitive == transitive(matrix)


def test_digests_tell_all_orders_apart():
    assert len({Order.from_matrix(matrix).digest for matrix in EVERY}) == len(EVERY)


def test_relations_and_links_by_definition():
    for matrix in EVERY:
        order = Order.from_matrix(matrix)
        elements = range(len(matrix))
        links = [
            [
                matrix[i, j] and not any(matrix[i, k] and matrix[k, j] for k in range(i + 1, j))
                for j in elements
            ]
            for i in elements
        ]
        assert order.relations == matrix.sum()
        np.testing.assert_array_equal(causal_matrix(order), matrix)
        np.testing.assert_array_equal(link_matrix(order), np.array(links, dtype=float).reshape(matrix.shape))


def test_height_is_the_longest_chain_and_the_index_of_nilpotency():
    for matrix in EVERY:
        order = Order.from_matrix(matrix)
        chains = [
            chosen
            for length in range(len(matrix) + 1)
            for chosen in combinations(range(len(matrix)), length)
            if all(matrix[i, j] for i, j in combinations(chosen, 2))
        ]
        causal = causal_matrix(order)
        powers = [np.linalg.matrix_power(causal, k) for k in range(len(matrix) + 1)]
        assert order.height == max(map(len, chains))
        assert order.height == next(k for k, power in enumerate(powers) if not power.any())
        # chains by length are the sums of powers, all of them together the sum of (2I − Z)⁻¹, Z = I + C
        identity = np.eye(len(matrix))
        all_chains = np.linalg.inv(2 * identity - (identity + causal)).sum()
        assert round(all_chains) == len(chains) - 1  # less the empty chain
        assert np.linalg.det(identity + causal) == pytest.approx(1, abs=1e-12)


@pytest.mark.parametrize("operator", OPERATORS)
@pytest.mark.parametrize("part", SELF_ADJOINT)
def test_sum_rules(part, operator):
    for matrix in EVERY:
        order = Order.from_matrix(matrix)
        pairs = order.relations if operator == "causal" else order.links.pairs
        eigenvalues = full_spectrum(OPERATORS[operator].matrix(order), part).eigenvalues
        assert len(eigenvalues) == len(matrix)
        assert (np.diff(eigenvalues) >= 0).all()
        assert eigenvalues.sum() == pytest.approx(0, abs=1e-13)
        assert (eigenvalues**2).sum() == pytest.approx(2 * pairs, abs=1e-12)
        if part == "antisymmetric":
            np.testing.assert_allclose(eigenvalues, -eigenvalues[::-1], atol=1e-13)
        assert audit(eigenvalues, part, float(pairs)).passed
