"""Leading spectra against full ones, against scipy's eigsh, and their residual bounds."""

import numpy as np
import pytest
from scipy.sparse.linalg import LinearOperator, eigsh
from tests.orders import (
    SELF_ADJOINT,
    antichain,
    chain,
    complete_bipartite,
    copies,
    product_of_chains,
    random_orders,
)

from conetone.diagonalise import leading
from conetone.diagonalise.basis import Basis
from conetone.diagonalise.full import full_spectrum
from conetone.diagonalise.leading import leading_spectrum
from conetone.errors import MatrixError
from conetone.operators.catalogue import OPERATORS
from conetone.operators.packed import PackedProduct
from conetone.sprinkle.relation import PackedRelation

EPSILON = np.finfo(float).eps


def ends(values, count):
    return values if len(values) <= 2 * count else np.concatenate([values[:count], values[-count:]])


def assert_bounds_hold(order, part, count, tolerance, operator="causal"):
    """The eigenvalues are those of the full spectrum, each within its bound."""
    found = leading_spectrum(OPERATORS[operator].product(order, 1), part, count, tolerance=tolerance)
    every = full_spectrum(OPERATORS[operator].matrix(order), part).eigenvalues
    expected = ends(every, count)
    rounding = 20 * len(every) * EPSILON * np.abs(every).max(initial=0)
    assert found.eigenvalues.shape == found.residual_bounds.shape == expected.shape
    assert (np.abs(found.eigenvalues - expected) <= found.residual_bounds + rounding).all()
    assert found.converged
    assert (found.residual_bounds <= max(tolerance * found.norm, rounding)).all()
    return found


@pytest.mark.parametrize("part", SELF_ADJOINT)
@pytest.mark.parametrize("operator", OPERATORS)
def test_against_full_spectra_of_every_ensemble(part, operator):
    krylov = 0
    for i, order in enumerate(random_orders(4, 700, seed=3)):
        found = assert_bounds_hold(order, part, 1 + i, (1e-6, 1e-9)[i % 2], operator)
        krylov += found.solver == "block-krylov"
    assert krylov > 4


@pytest.mark.parametrize("part", SELF_ADJOINT)
@pytest.mark.parametrize(
    "order",
    [
        antichain(400),
        chain(500),
        complete_bipartite(200, 300),
        product_of_chains(*(2,) * 9),
        product_of_chains(20, 20),
        copies(chain(3), 200),
        copies(complete_bipartite(2, 3), 100),
    ],
    ids=["antichain", "chain", "bipartite", "boolean lattice", "grid", "copies of a chain", "copies"],
)
def test_degenerate_orders(order, part):
    # repeated eigenvalues, more often than a block is wide; low ranks; none at all
    found = assert_bounds_hold(order, part, 12, 1e-9)
    assert found.solver == "block-krylov"


@pytest.mark.parametrize("part", SELF_ADJOINT)
def test_bounds_bound_what_has_not_converged(part, monkeypatch):
    monkeypatch.setattr(leading, "MOST_RESTARTS", 0)
    for order in random_orders(2, 900, seed=11):
        if order.elements < 400:
            continue
        found = leading_spectrum(PackedProduct(order.relation), part, 20, tolerance=1e-12)
        every = full_spectrum(order.relation.dense(np.float64), part, solver="lapack").eigenvalues
        assert not found.converged
        # to each value an eigenvalue within the bound; of the values, some are still far from exact
        distance = np.abs(found.eigenvalues[:, np.newaxis] - every).min(axis=1)
        assert (distance <= found.residual_bounds).all()
        assert found.residual_bounds.max() > 1e-12 * found.norm


@pytest.mark.parametrize(("count", "tolerance"), [(0, 1e-9), (5, 0.0), (5, float("nan")), (5, 1e-16)])
def test_what_cannot_be_reached_is_refused(count, tolerance):
    allowed = r"allowed: (a whole number from 1|at least 5\.7e-14 for 5 of each)"
    with pytest.raises(MatrixError, match=allowed):
        leading_spectrum(PackedProduct(chain(500).relation), "symmetric", count, tolerance=tolerance)


def unions_of_small_pieces(seed):
    """Many copies of a small matrix, and unrelated elements: high multiplicities, low rank."""
    generator = np.random.default_rng(seed)
    small = np.triu(generator.random((5, 5)) < 0.5, 1)
    matrix = np.zeros((300, 300), dtype=bool)
    for first in range(0, 5 * int(generator.integers(5, 40)), 5):
        matrix[first : first + 5, first : first + 5] = small
    return np.triu(matrix, 1)


@pytest.mark.parametrize("sign", [1, -1])
def test_the_krylov_relation_holds_where_directions_run_out(sign):
    replaced = 0
    for seed in range(40):
        packed = PackedProduct(PackedRelation.from_matrix(unions_of_small_pieces(seed)))
        a = packed.relation.dense(np.float64)
        a = a + sign * a.T
        basis = Basis(len(a), 96, 8, sign, 1, np.random.default_rng(seed))
        for _ in range(2):  # before and after a restart
            while not basis.is_full:
                basis.extend(lambda block, a=a: a @ block)
            v, t = basis._vectors[:, : basis.length], basis._projected[: basis.length, : basis.length]
            defect = a @ v - v @ t - basis._next @ basis._coupling[:, : basis.length]
            assert np.abs(defect).max() < 1e-12 * max(np.linalg.norm(a, 2), 1)
            assert np.abs(v.T @ v - np.eye(basis.length)).max() < 1e-13
            replaced += basis.ran_dry
            basis.restart(basis.ritz(), 20)
    assert replaced > 10


@pytest.mark.parametrize("part", SELF_ADJOINT)
def test_against_eigsh_with_the_same_products(part):
    order = next(order for order in random_orders(20, 1500, seed=4) if order.elements > 1000)
    product, n = PackedProduct(order.relation), order.elements
    sign, phase = (1, 1) if part == "symmetric" else (-1, 1j)

    def times(vector):
        parts = np.column_stack([vector.real.ravel(), vector.imag.ravel()])
        forward, backward = product.apply(parts)
        return phase * (forward + sign * backward) @ np.array([1, 1j])

    kind = np.float64 if part == "symmetric" else np.complex128
    matrix = LinearOperator(
        (n, n), dtype=kind, matvec=lambda x: times(x).real if kind is np.float64 else times(x)
    )
    start = np.random.default_rng(0).standard_normal(n).astype(kind)
    expected = np.sort(eigsh(matrix, k=20, which="LA", tol=1e-10, v0=start, return_eigenvectors=False))
    found = leading_spectrum(product, part, 20)
    np.testing.assert_allclose(found.eigenvalues[-20:], expected, atol=1e-9 * found.norm, rtol=0)


@pytest.mark.parametrize("part", SELF_ADJOINT)
def test_the_same_order_gives_the_same_bits_with_any_number_of_threads(part):
    order = next(order for order in random_orders(20, 900, seed=5) if order.elements > 700)
    one, two, again = (
        leading_spectrum(PackedProduct(order.relation, threads), part, 10) for threads in (1, 2, 1)
    )
    assert one.eigenvalues.tobytes() == two.eigenvalues.tobytes() == again.eigenvalues.tobytes()
    assert one.residual_bounds.tobytes() == two.residual_bounds.tobytes()


def test_small_orders_are_made_dense():
    for elements in (0, 1, 2, 5, 30):
        for part in SELF_ADJOINT:
            found = assert_bounds_hold(chain(elements), part, 4, 1e-9)
            assert found.solver.startswith("dense")
            assert len(found.eigenvalues) == min(8, elements)
