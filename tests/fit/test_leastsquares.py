"""Weighted and generalised linear least squares against SciPy and the normal equations."""

import numpy as np
import pytest
from scipy.optimize import curve_fit

from conetone.fit.leastsquares import generalised_least_squares, weighted_least_squares


def problem(seed):
    """A random design (m, k), values and errors of a stack of five."""
    generator = np.random.default_rng(seed)
    parameters = int(generator.integers(1, 5))
    points = int(generator.integers(parameters + 1, 20))
    design = generator.normal(size=(points, parameters))
    return design, generator.normal(size=(5, points)), generator.uniform(0.1, 3, size=(5, points))


def test_against_curve_fit():
    for seed in range(60):
        design, values, errors = problem(seed)
        fit = weighted_least_squares(design, values, errors)
        for copy in range(5):
            expected, covariance = curve_fit(
                lambda design, *parameters: design @ parameters,
                design,
                values[copy],
                p0=np.zeros(design.shape[1]),
                sigma=errors[copy],
                absolute_sigma=True,
            )
            np.testing.assert_allclose(fit.parameters[copy], expected, rtol=1e-5, atol=1e-6)
            np.testing.assert_allclose(fit.covariance[copy], covariance, rtol=1e-5, atol=1e-6)
            residuals = (values[copy] - design @ expected) / errors[copy]
            assert fit.chi2[copy] == pytest.approx(residuals @ residuals, rel=1e-6)


def test_against_the_normal_equations():
    for seed in range(200):
        design, values, errors = problem(seed)
        fit = weighted_least_squares(design, values, errors)
        for copy in range(5):
            weights = np.diag(errors[copy] ** -2)
            covariance = np.linalg.inv(design.T @ weights @ design)
            gain = covariance @ design.T @ weights
            np.testing.assert_allclose(fit.gain[copy], gain, rtol=1e-8, atol=1e-10)
            np.testing.assert_allclose(fit.covariance[copy], covariance, rtol=1e-8, atol=1e-10)
            np.testing.assert_allclose(fit.parameters[copy], gain @ values[copy], rtol=1e-8, atol=1e-10)


def test_a_stack_is_fitted_one_by_one():
    design, values, errors = problem(3)
    stacked = weighted_least_squares(design, values, errors)
    for copy in range(5):
        alone = weighted_least_squares(design, values[copy], errors[copy])
        for name in ("parameters", "gain", "covariance", "chi2"):
            np.testing.assert_allclose(getattr(stacked, name)[copy], getattr(alone, name), rtol=1e-12)


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_the_covariance_is_that_of_repeated_measurements(seed):
    generator = np.random.default_rng(seed)
    design, _, errors = problem(seed)
    truth = generator.normal(size=design.shape[1])
    errors = np.broadcast_to(errors[0], (4000, len(design)))
    fit = weighted_least_squares(
        design, design @ truth + errors * generator.normal(size=errors.shape), errors
    )
    pulls = (fit.parameters - truth) / np.sqrt(np.diagonal(fit.covariance, axis1=1, axis2=2))
    assert np.abs(pulls.mean(axis=0)).max() < 5 / np.sqrt(4000)
    assert np.abs(pulls.var(axis=0) - 1).max() < 5 * np.sqrt(2 / 4000)
    degrees = len(design) - design.shape[1]
    assert abs(fit.chi2.mean() - degrees) < 5 * np.sqrt(2 * degrees / 4000)


def test_a_term_that_repeats_another_does_no_harm():
    design = np.column_stack([np.ones(6), np.arange(6), np.arange(6)])
    fit = weighted_least_squares(design, 1 + 4 * np.arange(6.0), np.ones(6))
    # the pseudo-inverse shares the slope evenly
    np.testing.assert_allclose(fit.parameters, [1, 2, 2], rtol=1e-12)
    assert fit.chi2 == pytest.approx(0, abs=1e-20)


def covariances(generator, errors):
    """A random covariance matrix for each row of errors."""
    points = errors.shape[1]
    mixed = generator.normal(size=(len(errors), points, 2 * points))
    covariance = mixed @ np.swapaxes(mixed, 1, 2)
    scale = errors / np.sqrt(np.diagonal(covariance, axis1=1, axis2=2))
    return covariance * scale[:, :, np.newaxis] * scale[:, np.newaxis, :]


def test_generalised_against_the_normal_equations():
    for seed in range(200):
        design, values, errors = problem(seed)
        given = covariances(np.random.default_rng(seed), errors)
        fit = generalised_least_squares(design, values, given)
        for copy in range(5):
            weights = np.linalg.solve(given[copy], design)
            covariance = np.linalg.inv(design.T @ weights)
            gain = covariance @ weights.T
            parameters = gain @ values[copy]
            residuals = values[copy] - design @ parameters
            np.testing.assert_allclose(fit.gain[copy], gain, rtol=1e-6, atol=1e-9)
            np.testing.assert_allclose(fit.covariance[copy], covariance, rtol=1e-6, atol=1e-9)
            np.testing.assert_allclose(fit.parameters[copy], parameters, rtol=1e-6, atol=1e-9)
            chi2 = residuals @ np.linalg.solve(given[copy], residuals)
            assert fit.chi2[copy] == pytest.approx(chi2, rel=1e-6)


def test_generalised_of_independent_values_is_weighted():
    for seed in range(50):
        design, values, errors = problem(seed)
        diagonal = errors[:, :, np.newaxis] ** 2 * np.eye(design.shape[0])
        found = generalised_least_squares(design, values, diagonal)
        expected = weighted_least_squares(design, values, errors)
        for name in ("parameters", "gain", "covariance", "chi2"):
            np.testing.assert_allclose(getattr(found, name), getattr(expected, name), rtol=1e-9, atol=1e-12)


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_generalised_covariance_is_that_of_repeated_measurements(seed):
    generator = np.random.default_rng(seed)
    design, _, errors = problem(seed)
    given = covariances(generator, errors[:1])[0]
    truth = generator.normal(size=design.shape[1])
    noise = generator.multivariate_normal(np.zeros(len(design)), given, size=4000)
    fit = generalised_least_squares(design, design @ truth + noise, given)
    pulls = (fit.parameters - truth) / np.sqrt(np.diagonal(fit.covariance))
    assert np.abs(pulls.mean(axis=0)).max() < 5 / np.sqrt(4000)
    assert np.abs(pulls.var(axis=0) - 1).max() < 5 * np.sqrt(2 / 4000)
    degrees = len(design) - design.shape[1]
    assert abs(fit.chi2.mean() - degrees) < 5 * np.sqrt(2 * degrees / 4000)


def test_a_covariance_that_is_none_is_refused():
    with pytest.raises(np.linalg.LinAlgError):
        generalised_least_squares(np.ones((2, 1)), np.zeros(2), np.array([[1.0, 2], [2, 1]]))
