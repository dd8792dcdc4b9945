"""Singular values, all and leading, against scipy's of the dense matrix, and their audit."""

from itertools import chain as chained

import numpy as np
import pytest
from scipy.linalg import svdvals
from tests.orders import (
    antichain,
    chain,
    complete_bipartite,
    copies,
    degenerate_orders,
    product_of_chains,
    random_orders,
)

from conetone.diagonalise import leading
from conetone.diagonalise.audit import audit
from conetone.diagonalise.full import full_spectrum
from conetone.diagonalise.leading import leading_spectrum
from conetone.errors import MatrixError
from conetone.operators.catalogue import OPERATORS
from conetone.operators.packed import PackedProduct
from conetone.operators.product import Doubled

EPSILON = np.finfo(float).eps


def rising(matrix):
    """By a routine other than the one under test, which takes the transpose and overwrites it."""
    return np.linalg.svd(matrix, compute_uv=False)[::-1] if len(matrix) else np.empty(0)


@pytest.mark.parametrize("operator", OPERATORS.values(), ids=lambda operator: operator.name)
def test_all_of_hundreds_of_orders(operator):
    for order in chained(random_orders(35, 120), degenerate_orders()):
        matrix = operator.matrix(order)
        expected = rising(matrix)
        found = full_spectrum(matrix, "singular")
        again = full_spectrum(matrix.copy(), "singular", overwrite=True)
        assert found.eigenvalues.shape == (order.elements,)
        assert (found.eigenvalues >= 0).all()
        assert (np.diff(found.eigenvalues) >= 0).all()
        rounding = 20 * order.elements * EPSILON * expected.max(initial=0)
        np.testing.assert_allclose(found.eigenvalues, expected, atol=rounding, rtol=0)
        np.testing.assert_array_equal(found.eigenvalues, again.eigenvalues)
        assert found.solver == ("lapack-dgesdd" if order.elements > 1 else "none")
        checks = audit(found.eigenvalues, "singular", operator.square_sum(order))
        assert checks.passed
        assert (checks.sum_defect, checks.pairing_defect) == (None, None)


def test_of_matrices_that_are_not_triangular_and_of_one_number():
    matrix = np.random.default_rng(1).standard_normal((90, 90))
    before = matrix.copy()
    for layout in (matrix, np.asfortranarray(matrix), matrix.T.copy().T):
        np.testing.assert_allclose(full_spectrum(layout, "singular").eigenvalues, rising(matrix), rtol=1e-11)
    np.testing.assert_array_equal(matrix, before)
    assert full_spectrum(np.array([[-3.0]]), "singular").eigenvalues.tolist() == [3.0]


def test_two_stages_are_refused():
    with pytest.raises(MatrixError, match="found two-stage; allowed: auto or lapack for singular values"):
        full_spectrum(np.eye(3), "singular", solver="two-stage")


def test_the_audit_notices_wrong_values():
    order = next(order for order in random_orders(20, 90, seed=2) if order.elements > 60)
    matrix = OPERATORS["causal"].matrix(order)
    values, pairs = full_spectrum(matrix, "singular").eigenvalues, float(order.relations)
    assert audit(values, "singular", pairs).passed
    for wrong in (values * (1 + 1e-9), values[:-1], values * np.sqrt(2), np.append(values[1:], np.nan)):
        assert not audit(wrong, "singular", pairs).passed
    for position in range(len(values) // 2, len(values)):
        wrong = values.copy()
        wrong[position] += 1e-8 * values[-1]
        assert not audit(wrong, "singular", pairs).passed
    assert not audit(values, "singular", pairs + 1).passed
    found = audit(np.array([0.0, 1.0, 3.0]), "singular", 7.0)
    assert found.square_sum_defect == pytest.approx(3 / (3 * 9))


def test_the_doubled_product_is_that_of_the_doubled_matrix():
    generator = np.random.default_rng(3)
    for order in chained(random_orders(10, 150, seed=6), [antichain(0), chain(1)]):
        n = order.elements
        matrix = order.relation.dense(np.float64)
        doubled = np.zeros((2 * n, 2 * n))
        doubled[:n, n:] = matrix
        product = Doubled(PackedProduct(order.relation, 2))
        assert (product.elements, product.threads) == (2 * n, 2)
        block = generator.standard_normal((2 * n, int(generator.integers(1, 20))))
        forward, backward = product.apply(block)
        np.testing.assert_allclose(forward, doubled @ block, atol=1e-11, rtol=0)
        np.testing.assert_allclose(backward, doubled.T @ block, atol=1e-11, rtol=0)


def assert_leading(order, count, tolerance, operator="causal"):
    found = leading_spectrum(OPERATORS[operator].product(order, 1), "singular", count, tolerance=tolerance)
    every = svdvals(OPERATORS[operator].matrix(order))[::-1] if order.elements else np.empty(0)
    expected = every[-count:]
    rounding = 20 * order.elements * EPSILON * every.max(initial=0)
    assert found.eigenvalues.shape == found.residual_bounds.shape == expected.shape
    assert (found.eigenvalues >= 0).all()
    assert (np.diff(found.eigenvalues) >= 0).all()
    assert (np.abs(found.eigenvalues - expected) <= found.residual_bounds + rounding).all()
    assert found.converged
    assert (found.residual_bounds <= max(tolerance * found.norm, rounding)).all()
    return found


@pytest.mark.parametrize("operator", OPERATORS)
def test_leading_of_every_ensemble(operator):
    krylov = 0
    for i, order in enumerate(random_orders(6, 500, seed=8)):
        found = assert_leading(order, 1 + i, (1e-6, 1e-9)[i % 2], operator)
        krylov += found.solver == "block-krylov"
    assert krylov > 6


@pytest.mark.parametrize(
    ("order", "largest"),
    [
        # s = 1/(2 cos(kπ/(2n − 1))), see below
        (chain(400), 1 / (2 * np.cos(399 * np.pi / 799))),
        (antichain(300), 0.0),
        (complete_bipartite(150, 250), np.sqrt(150 * 250)),
        (copies(complete_bipartite(2, 3), 80), np.sqrt(6)),
        (product_of_chains(*(2,) * 8), None),
        (product_of_chains(18, 18), None),
        (copies(chain(3), 130), (1 + np.sqrt(5)) / 2),
    ],
    ids=["chain", "antichain", "bipartite", "copies", "boolean lattice", "grid", "copies of a chain"],
)
def test_leading_of_degenerate_orders(order, largest):
    found = assert_leading(order, 10, 1e-9)
    assert found.solver == "block-krylov"
    if largest is not None:
        assert found.eigenvalues[-1] == pytest.approx(largest, rel=1e-9, abs=1e-12)


def test_every_singular_value_of_a_chain():
    # C of an n-chain without its zero row and column is the summation of n − 1 numbers: the inverse of a
    # first difference, whose product with its transpose has the eigenvalues 4 cos²(kπ/(2n − 1)); derived here
    for n in (2, 3, 10, 65, 300):
        expected = 1 / (2 * np.cos(np.arange(1, n) * np.pi / (2 * n - 1)))
        found = full_spectrum(OPERATORS["causal"].matrix(chain(n)), "singular").eigenvalues
        np.testing.assert_allclose(found, np.r_[0.0, expected], atol=20 * n * EPSILON * found[-1], rtol=0)


def test_of_small_orders_every_singular_value_is_computed():
    for elements in (0, 1, 2, 5, 30, 100):
        found = assert_leading(chain(elements), 4, 1e-9)
        assert found.solver.startswith("dense")
        assert len(found.eigenvalues) == min(4, elements)


def test_bounds_bound_what_has_not_converged(monkeypatch):
    monkeypatch.setattr(leading, "MOST_RESTARTS", 0)
    for order in (order for order in random_orders(2, 900, seed=11) if order.elements > 400):
        found = leading_spectrum(PackedProduct(order.relation), "singular", 20, tolerance=1e-12)
        every = rising(order.relation.dense(np.float64))
        assert not found.converged
        distance = np.abs(found.eigenvalues[:, np.newaxis] - every).min(axis=1)
        assert (distance <= found.residual_bounds + 20 * order.elements * EPSILON * every[-1]).all()


def test_the_same_order_gives_the_same_bits_with_any_number_of_threads():
    order = next(order for order in random_orders(20, 900, seed=5) if order.elements > 700)
    one, two, again = (
        leading_spectrum(PackedProduct(order.relation, threads), "singular", 10) for threads in (1, 2, 1)
    )
    assert one.eigenvalues.tobytes() == two.eigenvalues.tobytes() == again.eigenvalues.tobytes()
    assert one.residual_bounds.tobytes() == two.residual_bounds.tobytes()
