"""Least squares and the jackknife against SciPy's curve_fit and bootstrap."""

import numpy as np
import pytest
from scipy.optimize import curve_fit
from scipy.stats import bootstrap

from conetone.fit.leastsquares import weighted_least_squares
from conetone.fit.resample import jackknife_variance


def test_parameters_and_errors_are_those_of_curve_fit():
    for seed in range(50):
        generator = np.random.default_rng(seed)
        count = generator.integers(6, 30)
        x, errors = generator.uniform(0.5, 3, count), generator.uniform(0.1, 2, count)
        design = np.column_stack([np.ones(count), -np.log(x), 1 / x])
        values = design @ generator.normal(size=3) + errors * generator.normal(size=count)
        fit = weighted_least_squares(design, values, errors)
        expected, covariance = curve_fit(
            lambda _, a, b, c, design=design: design @ [a, b, c],
            x,
            values,
            [0.0, 0, 0],
            errors,
            absolute_sigma=True,
        )
        scale = np.sqrt(np.diag(covariance))
        np.testing.assert_allclose((fit.parameters - expected) / scale, 0, atol=1e-5)
        np.testing.assert_allclose((fit.covariance - covariance) / np.outer(scale, scale), 0, atol=1e-5)
        residuals = (values - design @ expected) / errors
        assert fit.chi2 == pytest.approx((residuals**2).sum(), rel=1e-7)


def log_ratio(x, y, axis=-1):
    """A statistic that is no mean: the logarithm of a ratio of means."""
    return np.log(x.mean(axis=axis) / y.mean(axis=axis))


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_the_jackknife_agrees_with_the_bootstrap(seed):
    count, resamples = 80, 4000
    generator = np.random.default_rng(seed)
    common = generator.normal(size=count)
    x, y = 4 + common + generator.normal(size=count), 6 + common * 0.5 + generator.exponential(size=count)
    copies = np.array([log_ratio(np.delete(x, i), np.delete(y, i)) for i in range(count)])
    found = np.sqrt(jackknife_variance(copies))
    expected = bootstrap(
        (x, y), log_ratio, paired=True, vectorized=True, n_resamples=resamples, method="percentile",
        rng=np.random.default_rng(seed),
    ).standard_error  # fmt: skip
    # the bootstrap divides by m where the jackknife divides by m − 1, and its error is known to 1/√(2B)
    expected *= np.sqrt(count / (count - 1))
    assert abs(found / expected - 1) < 5 / np.sqrt(2 * resamples) + 1 / count
