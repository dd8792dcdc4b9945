"""Spectra of the causal matrix of the two-dimensional diamond, known exactly in the continuum."""

import numpy as np
import pytest
from scipy.optimize import brentq

from conetone.diagonalise.full import full_spectrum
from conetone.diagonalise.leading import leading_spectrum
from conetone.operators.catalogue import OPERATORS
from conetone.operators.causal import causal_matrix
from conetone.sprinkle.minkowski import minkowski_diamond

ELEMENTS = 1000
SEEDS = range(12)
# Taking out one of n elements moves an eigenvalue by order one, so its mean is off by order one: 1/n here.
FINITE_SIZE = 1 / ELEMENTS

# Limits of the leading positive eigenvalues of i(C − Cᵀ)/n: 1/(2x). Johnston 2010 (thesis); Afshordi, Buck,
# Dowker, Rideout, Sorkin & Yazdi 2012 (JHEP).
LEADING = (0.428978, 0.159155, 0.108596, 0.079577, 0.064186)


@pytest.fixture(scope="module")
def matrices():
    """Causal matrices of sprinklings, one for each seed."""
    return [
        causal_matrix(minkowski_diamond(ELEMENTS, np.random.default_rng(seed), dimension=2)) for seed in SEEDS
    ]


def exact_eigenvalues(count):
    """1/(2x), falling, for x in {mπ} ∪ {x > 0: tan x = 2x}."""
    roots = [brentq(lambda x: np.sin(x) - 2 * x * np.cos(x), 0.5, np.pi / 2)]
    for m in range(1, count):
        roots.append(brentq(lambda x: np.sin(x) - 2 * x * np.cos(x), m * np.pi, (m + 0.5) * np.pi))
        roots.append(m * np.pi)
    return 1 / (2 * np.sort(roots)[:count])


def test_the_roots_give_the_printed_values():
    np.testing.assert_allclose(exact_eigenvalues(5), LEADING, atol=5e-7)


def test_leading_eigenvalues_of_the_antisymmetric_part(matrices):
    spectra = np.array([full_spectrum(matrix, "antisymmetric").eigenvalues for matrix in matrices])
    found = spectra[:, ::-1][:, :10] / ELEMENTS
    error = found.std(axis=0, ddof=1) / np.sqrt(len(found))
    assert (np.abs(found.mean(axis=0) - exact_eigenvalues(10)) < 5 * error + FINITE_SIZE).all()
    assert (error[:5] < 0.01 * np.array(LEADING)).all()  # the comparison is one to a per cent
    np.testing.assert_allclose(spectra[:, :10], -found * ELEMENTS, rtol=0, atol=1e-9)


def test_the_first_fifty_eigenvalues_of_a_hundred_thousand_elements():
    elements, ranks = 100_000, 50
    expected = exact_eigenvalues(ranks)
    deviations = []
    for seed in range(3):
        order = minkowski_diamond(elements, np.random.default_rng(seed), dimension=2)
        found = leading_spectrum(
            OPERATORS["causal"].product(order, 1), "antisymmetric", ranks, tolerance=1e-6
        )
        assert found.converged
        assert (found.residual_bounds < 1e-3 * found.eigenvalues[-ranks]).all()
        deviations.append(found.eigenvalues[::-1][:ranks] / elements / expected - 1)
    # the sampling error of an eigenvalue relative to itself varies little with rank: pooled over ranks
    error = np.sqrt(np.var(deviations, axis=0, ddof=1).mean() / len(deviations))
    assert error < 0.003
    shift = 1 / (elements * expected)  # an eigenvalue is off by order one, as above
    assert (np.abs(np.mean(deviations, axis=0)) < 5 * error + shift).all()
