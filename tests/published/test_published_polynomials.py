"""Model averages on the polynomial example of Jay & Neil (2021, arXiv 2008.01069)."""

import numpy as np
import pytest

from conetone.fit.average import information_criterion, weights_of
from conetone.fit.leastsquares import weighted_least_squares

# Their mock data: y = 1.80 − 0.53 (x/16) + 0.31 (x/16)² at x = 1 … 15, with 160 samples of unit noise, fitted
# by polynomials of degree 0 to 5 with priors of 0 ± 10 on every coefficient; the average of the intercept is
# judged. Numbers as in the notebook published with the paper. Errors are taken as independent here, and no
# value of the paper's tables is compared: they depend on its random draw.
TRUTH = np.array([1.80, -0.53, 0.31])
X = np.arange(1, 16) / 16
SAMPLES = 160
DEGREES = range(6)
PRIOR = 10.0


def mock_data(seed, draws):
    """Means and standard errors, (draws, 15)."""
    generator = np.random.default_rng(seed)
    exact = np.vander(X, 3, increasing=True) @ TRUTH
    samples = exact + generator.normal(size=(draws, SAMPLES, len(X)))
    return samples.mean(axis=1), samples.std(axis=1, ddof=1) / np.sqrt(SAMPLES)


def fits(values, errors):
    """Intercepts, their variances and χ² by degree, (6, draws)."""
    found = []
    for degree in DEGREES:
        design = np.vstack([np.vander(X, degree + 1, increasing=True), np.eye(degree + 1)])
        prior = np.ones((len(values), degree + 1))
        fit = weighted_least_squares(
            design, np.hstack([values, 0 * prior]), np.hstack([errors, PRIOR * prior])
        )
        found.append((fit.parameters[:, 0], fit.covariance[:, 0, 0], fit.chi2))
    return (np.array(column) for column in zip(*found, strict=True))


def averaged(values, errors):
    """Averages, their errors, weights (6, draws), and what single degrees say."""
    intercepts, variances, chi2 = fits(values, errors)
    parameters = np.array([degree + 1.0 for degree in DEGREES])
    criterion = information_criterion(chi2.T[:, np.newaxis, :], parameters, np.zeros((1, len(DEGREES))))
    weights = weights_of(criterion, axis=-1).T
    value = (weights * intercepts).sum(axis=0)
    variance = (weights * variances).sum(axis=0) + (weights * intercepts**2).sum(axis=0) - value**2
    return value, np.sqrt(variance), weights, intercepts, np.sqrt(variances)


def test_it_is_the_average_written_as_loops():
    values, errors = mock_data(1, 20)
    found, error, *_ = averaged(values, errors)
    for draw, (y, dy) in enumerate(zip(values, errors, strict=True)):
        fitted = []
        for degree in DEGREES:
            powers = X[:, np.newaxis] ** np.arange(degree + 1)
            normal = (powers.T / dy**2) @ powers + np.eye(degree + 1) / PRIOR**2
            best = np.linalg.solve(normal, (powers.T / dy**2) @ y)
            chi2 = (((y - powers @ best) / dy) ** 2).sum() + (best**2).sum() / PRIOR**2
            weight = np.exp(-(chi2 + 2 * (degree + 1)) / 2)
            fitted.append((weight, best[0], np.linalg.inv(normal)[0, 0]))
        total = sum(w for w, _, _ in fitted)
        mean = sum(w * a for w, a, _ in fitted) / total
        square = sum(w * (s + a * a) for w, a, s in fitted) / total - mean**2
        assert found[draw] == pytest.approx(mean, rel=1e-9)
        assert error[draw] == pytest.approx(np.sqrt(square), rel=1e-6)


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_the_averaged_intercept_covers_the_truth(seed):
    draws = 1500
    value, error, weights, intercepts, errors = averaged(*mock_data(seed, draws))
    off = np.abs(value - TRUTH[0])
    for sigmas, nominal, most in [(1, 0.683, 0.80), (2, 0.954, 0.99)]:
        slack = 5 * np.sqrt(nominal * (1 - nominal) / draws)
        assert nominal - slack < (off < sigmas * error).mean() < most
    # the paper: consistent with the truth; its bias stays well inside the error
    assert abs(value.mean() - TRUTH[0]) < 0.3 * error.mean()

    # what averaging is for: the degree with the most weight, taken alone, covers far too little
    best = weights.argmax(axis=0), np.arange(draws)
    alone = (np.abs(intercepts[best] - TRUTH[0]) < errors[best]).mean()
    assert alone < 0.683 - 5 * np.sqrt(0.683 * 0.317 / draws)


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_more_data_rule_out_what_is_too_simple_and_the_bias_goes(seed):
    generator = np.random.default_rng(seed)
    errors = np.full((1000, len(X)), 1 / np.sqrt(20_000))
    values = np.vander(X, 3, increasing=True) @ TRUTH + errors * generator.normal(size=errors.shape)
    value, _, weights, *_ = averaged(values, errors)
    assert weights[:2].max() < 0.01
    assert weights.mean(axis=1).argmax() == 2  # the degree of the truth
    assert abs(value.mean() - TRUTH[0]) < 5 * value.std() / np.sqrt(len(value))
