"""The audit passes true spectra and refuses wrong ones."""

import numpy as np
import pytest
from tests.orders import SELF_ADJOINT

from conetone.diagonalise.audit import SAFETY, audit
from conetone.diagonalise.full import full_spectrum
from conetone.operators.catalogue import OPERATORS
from conetone.sprinkle.catalogue import ENSEMBLES, sprinkle


def spectrum_of(ensemble, elements, operator, part, seed=0):
    """Eigenvalues and the exact Σ M²."""
    parameters = {parameter.name: 3 for parameter in ENSEMBLES[ensemble].parameters}
    order = sprinkle(ensemble, parameters, elements, np.random.default_rng(seed))
    eigenvalues = full_spectrum(OPERATORS[operator].matrix(order), part).eigenvalues
    return eigenvalues.copy(), OPERATORS[operator].square_sum(order)


@pytest.mark.parametrize("part", SELF_ADJOINT)
@pytest.mark.parametrize("operator", OPERATORS)
@pytest.mark.parametrize("ensemble", ENSEMBLES)
def test_true_spectra_pass(ensemble, operator, part):
    for elements in (0, 1, 2, 3, 10, 64, 150):
        for seed in range(5):
            eigenvalues, square_sum = spectrum_of(ensemble, elements, operator, part, seed)
            found = audit(eigenvalues, part, square_sum)
            assert found.passed
            assert (found.pairing_defect is None) == (part == "symmetric")


@pytest.mark.parametrize("part", SELF_ADJOINT)
def test_one_wrong_eigenvalue_is_noticed(part):
    eigenvalues, square_sum = spectrum_of("minkowski-diamond", 60, "causal", part)
    norm = np.abs(eigenvalues).max()
    for position in range(len(eigenvalues)):
        for error in (1e-8, -1e-8, 1e-3, -0.5):
            wrong = eigenvalues.copy()
            wrong[position] += error * norm
            assert not audit(np.sort(wrong), part, square_sum).passed


@pytest.mark.parametrize("part", SELF_ADJOINT)
def test_wrong_spectra_are_noticed(part):
    eigenvalues, square_sum = spectrum_of("minkowski-diamond", 60, "causal", part)
    repeated = np.sort(np.append(eigenvalues[:-1], eigenvalues[-2]))
    for wrong in (eigenvalues * (1 + 1e-9), eigenvalues / 2, eigenvalues[:-1], eigenvalues[1:], repeated):
        assert not audit(wrong, part, square_sum).passed
    for count in (square_sum - 1, square_sum + 1, 0):
        assert not audit(eigenvalues, part, count).passed


@pytest.mark.parametrize("value", [np.nan, np.inf, -np.inf])
@pytest.mark.parametrize("part", SELF_ADJOINT)
def test_a_value_that_is_not_finite_is_noticed(part, value):
    eigenvalues, square_sum = spectrum_of("minkowski-box", 30, "causal", part)
    for position in (0, 15, 29):
        wrong = eigenvalues.copy()
        wrong[position] = value
        with np.errstate(invalid="ignore"):
            assert not audit(wrong, part, square_sum).passed


def test_a_missing_pairing_is_noticed_where_both_sums_hold():
    # Σ λ = 0 and Σ λ² = 2 · 3, but not symmetric about zero
    eigenvalues = np.array([-2.0, 0.0, 1.0, 1.0])
    assert audit(eigenvalues, "symmetric", 3).passed
    assert not audit(eigenvalues, "antisymmetric", 3).passed


def test_defects_are_the_relative_ones_they_say():
    eigenvalues = np.array([-3.0, -1.0, 0.5, 4.0])
    found = audit(eigenvalues, "antisymmetric", 10.0)
    assert found.sum_defect == pytest.approx(0.5 / (4 * 4))
    assert found.square_sum_defect == pytest.approx(abs(9 + 1 + 0.25 + 16 - 20) / (4 * 16))
    assert found.pairing_defect == pytest.approx(1 / 4)
    assert found.tolerance == pytest.approx(SAFETY * 4 * 2**-52)
