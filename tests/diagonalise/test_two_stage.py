"""The two-stage reduction against LAPACK, on orders of every ensemble and on degenerate ones."""

from itertools import chain as chained

import numpy as np
import pytest
from tests.orders import SELF_ADJOINT, chain, degenerate_orders, random_orders

from conetone.diagonalise.audit import audit
from conetone.diagonalise.band import reduce_to_tridiagonal
from conetone.diagonalise.full import CROSSOVER, WIDTH, full_spectrum
from conetone.errors import MatrixError
from conetone.operators.catalogue import OPERATORS

EPSILON = np.finfo(float).eps


def hermitian(matrix, part):
    return matrix + matrix.T if part == "symmetric" else 1j * (matrix - matrix.T)


@pytest.mark.parametrize("part", SELF_ADJOINT)
@pytest.mark.parametrize("operator", OPERATORS.values(), ids=lambda operator: operator.name)
def test_within_rounding_of_lapack_on_hundreds_of_orders(operator, part):
    for order in chained(random_orders(35, 300), degenerate_orders()):
        matrix = operator.matrix(order)
        expected = np.linalg.eigvalsh(hermitian(matrix, part))
        found = full_spectrum(matrix, part, solver="two-stage").eigenvalues
        assert found.shape == expected.shape
        assert (np.diff(found) >= 0).all()
        norm = np.abs(expected).max(initial=0.0)
        np.testing.assert_allclose(found, expected, atol=20 * len(matrix) * EPSILON * norm, rtol=0)
        assert audit(found, part, operator.square_sum(order)).passed
        if part == "antisymmetric":
            np.testing.assert_array_equal(found, -found[::-1])  # by construction


@pytest.mark.parametrize("part", SELF_ADJOINT)
def test_of_matrices_that_are_not_triangular(part):
    for seed, elements in enumerate((2, 3, 10, WIDTH, WIDTH + 1, 2 * WIDTH + 1, 2 * WIDTH + 2, 300, 600)):
        matrix = np.random.default_rng(seed).standard_normal((elements, elements))
        before = matrix.copy()
        expected = np.linalg.eigvalsh(hermitian(matrix, part))
        tolerance = 20 * elements * EPSILON * np.abs(expected).max()
        found = full_spectrum(matrix, part, solver="two-stage").eigenvalues
        np.testing.assert_array_equal(matrix, before)
        np.testing.assert_allclose(found, expected, atol=tolerance, rtol=0)
        strided = np.zeros((2 * elements, 2 * elements))[::2, ::2]
        strided[...] = matrix
        backwards = matrix[::-1, ::-1].copy()[::-1, ::-1]
        for layout in (matrix.copy(order="C"), matrix.copy(order="F"), strided, backwards):
            overwritten = full_spectrum(layout, part, solver="two-stage", overwrite=True)
            np.testing.assert_allclose(overwritten.eigenvalues, expected, atol=tolerance, rtol=0)


@pytest.mark.parametrize("kind", [np.int64, np.float32, np.bool_])
def test_of_matrices_of_other_numbers(kind):
    matrix = chain(300).relation.dense(np.bool_).astype(kind)
    found = full_spectrum(matrix, "symmetric", solver="two-stage", overwrite=True).eigenvalues
    np.testing.assert_allclose(found, [-1.0] * 299 + [299.0], atol=1e-10)


@pytest.mark.parametrize("sign", [1, -1])
@pytest.mark.parametrize("width", [2, 3, 5, 8, 31])
def test_every_width_of_band(sign, width):
    for elements in (2, 3, width, width + 1, width + 2, 2 * width, 2 * width + 1, 90):
        a = np.random.default_rng(elements).standard_normal((elements, elements))
        a += sign * a.T
        lower = np.tril(a).copy(order="F")
        lower[np.triu_indices(elements, 1)] = 1e9  # the upper triangle is not to be used
        found = reduce_to_tridiagonal(lower, sign, width)
        t = np.diag(found.diagonal) + np.diag(found.off_diagonal, -1) + sign * np.diag(found.off_diagonal, 1)
        phase = 1 if sign > 0 else 1j
        np.testing.assert_allclose(
            np.linalg.eigvalsh(phase * t), np.linalg.eigvalsh(phase * a), atol=1e-12, rtol=0
        )


@pytest.mark.parametrize("part", SELF_ADJOINT)
def test_auto_takes_the_faster_solver_and_both_agree(part):
    below, above = (chain(CROSSOVER[part] + step).relation.dense(np.float64) for step in (-1, 0))
    assert full_spectrum(below, part).solver.startswith("lapack")
    assert full_spectrum(above, part).solver == "two-stage"
    first, second = (full_spectrum(above, part, solver=solver) for solver in ("lapack", "two-stage"))
    tolerance = 20 * len(above) * EPSILON * len(above)
    np.testing.assert_allclose(first.eigenvalues, second.eigenvalues, atol=tolerance, rtol=0)


@pytest.mark.slow
def test_the_chain_of_5000_elements():
    # cot((2k − 1)π/(2n)), k = 1 … n: derived in tests/published/test_published_small_spectra.py
    n = 5000
    expected = np.sort(1 / np.tan((2 * np.arange(1, n + 1) - 1) * np.pi / (2 * n)))
    found = full_spectrum(
        OPERATORS["causal"].matrix(chain(n)), "antisymmetric", solver="two-stage", overwrite=True
    ).eigenvalues
    np.testing.assert_allclose(found, expected, atol=20 * n * EPSILON * expected[-1], rtol=0)


@pytest.mark.parametrize("bad", [np.nan, np.inf])
@pytest.mark.parametrize("part", SELF_ADJOINT)
def test_what_is_not_a_finite_square_matrix_is_refused(part, bad):
    matrix = np.zeros((700, 700))
    matrix[600, 3] = bad
    with pytest.raises(MatrixError, match=r"matrix\[600, 3\]: found (nan|inf); allowed: finite numbers"):
        full_spectrum(matrix, part)
    with pytest.raises(MatrixError, match=r"shape \(3, 4\)"):
        full_spectrum(np.zeros((3, 4)), part)
