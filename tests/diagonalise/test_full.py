"""Full spectra against numpy and against singular values, which another algorithm finds."""

import numpy as np
import pytest
from tests.orders import SELF_ADJOINT

from conetone.diagonalise.full import full_spectrum
from conetone.operators.catalogue import OPERATORS
from conetone.sprinkle.catalogue import ENSEMBLES, sprinkle


def parts_of(matrix):
    return {"symmetric": matrix + matrix.T, "antisymmetric": 1j * (matrix - matrix.T)}


def random_matrices():
    """Both matrices of orders of every ensemble, sizes 0 … 40."""
    for seed, elements in enumerate(range(41)):
        for ensemble in ENSEMBLES.values():
            generator = np.random.default_rng(seed)
            parameters = {
                p.name: int(generator.integers(p.minimum, p.maximum + 1)) for p in ensemble.parameters
            }
            order = sprinkle(ensemble.name, parameters, elements, generator)
            for operator in OPERATORS.values():
                yield operator.matrix(order)


@pytest.mark.parametrize("part", SELF_ADJOINT)
def test_against_numpy_and_singular_values(part):
    for matrix in random_matrices():
        hermitian = parts_of(matrix)[part]
        spectrum = full_spectrum(matrix, part)
        found = spectrum.eigenvalues
        norm = np.linalg.norm(hermitian, 2) if matrix.size else 0.0
        tolerance = 20 * len(matrix) * np.finfo(float).eps * norm
        assert found.shape == (len(matrix),)
        assert (np.diff(found) >= 0).all()
        np.testing.assert_allclose(found, np.linalg.eigvalsh(hermitian), atol=tolerance, rtol=0)
        # magnitudes are the singular values of a real matrix: M + Mᵀ, or M − Mᵀ without its factor i
        real = matrix + matrix.T if part == "symmetric" else matrix - matrix.T
        singular = np.linalg.svd(real, compute_uv=False)
        np.testing.assert_allclose(np.sort(np.abs(found))[::-1], singular, atol=tolerance, rtol=0)


@pytest.mark.parametrize("part", SELF_ADJOINT)
def test_of_matrices_with_a_known_spectrum(part):
    # A rank-two part: u vᵀ ± v uᵀ with orthogonal u and v has eigenvalues ±|u||v| and zeros.
    u, v = np.array([3.0, 0, 4, 0, 0]), np.array([0, 1.0, 0, 2, 2])
    expected = [-15, 0, 0, 0, 15]
    np.testing.assert_allclose(full_spectrum(np.outer(u, v), part).eigenvalues, expected, atol=1e-13)


@pytest.mark.parametrize("part", SELF_ADJOINT)
def test_the_matrix_is_left_alone(part):
    matrix = np.triu(np.random.default_rng(1).random((20, 20)), 1)
    before = matrix.copy()
    full_spectrum(matrix, part)
    np.testing.assert_array_equal(matrix, before)


def test_solvers_are_named_and_results_read_only():
    matrix = np.triu(np.ones((4, 4)), 1)
    assert full_spectrum(matrix, "symmetric").solver == "lapack-dsyevd"
    assert full_spectrum(matrix, "antisymmetric").solver == "lapack-dgehrd-dsterf"
    assert full_spectrum(np.empty((0, 0)), "symmetric").solver == "none"
    with pytest.raises(ValueError, match="read-only"):
        full_spectrum(matrix, "symmetric").eigenvalues[0] = 0


@pytest.mark.parametrize("part", SELF_ADJOINT)
def test_the_same_matrix_gives_the_same_bits(part):
    matrix = np.triu(np.random.default_rng(2).random((60, 60)) < 0.5, 1).astype(float)
    first, second = (full_spectrum(matrix.copy(), part).eigenvalues for _ in range(2))
    assert first.tobytes() == second.tobytes()
