"""Shrunk correlations against scikit-learn, and copies against plain refits."""

import numpy as np
import pytest
from sklearn.covariance import ledoit_wolf

from conetone.fit.shrinkage import SMALLEST_WEIGHT, shrunk_correlation, shrunk_correlation_copies


def mixed_values(generator, count, width):
    """Columns correlated through random common factors, of any scale and mean."""
    factors = generator.normal(size=(count, 3)) @ generator.normal(size=(3, width)) * generator.uniform(0, 3)
    noise = generator.normal(size=(count, width))
    return (factors + noise) * 10.0 ** generator.integers(-6, 4, width) + generator.normal(size=width)


def test_it_is_that_of_scikit_learn():
    for seed in range(300):
        generator = np.random.default_rng(seed)
        values = mixed_values(generator, generator.integers(4, 80), generator.integers(2, 20))
        standard = (values - values.mean(axis=0)) / values.std(axis=0)
        expected, weight = ledoit_wolf(standard)
        assert weight > SMALLEST_WEIGHT
        np.testing.assert_allclose(shrunk_correlation(values), expected, rtol=1e-9, atol=1e-11)


def test_copies_are_plain_refits():
    for seed in range(100):
        generator = np.random.default_rng(seed)
        values = mixed_values(generator, generator.integers(4, 30), generator.integers(1, 15))
        copies = shrunk_correlation_copies(values)
        np.testing.assert_array_equal(copies[0], shrunk_correlation(values))
        for i in range(len(values)):
            plain = shrunk_correlation(np.delete(values, i, axis=0))
            np.testing.assert_allclose(copies[1 + i], plain, rtol=1e-12, atol=1e-12)


def test_it_does_not_depend_on_units():
    for seed in range(20):
        generator = np.random.default_rng(seed)
        values = mixed_values(generator, 20, 6)
        other = values * 2.0 ** generator.integers(-9, 9, 6)
        np.testing.assert_allclose(shrunk_correlation(other), shrunk_correlation(values), rtol=1e-12)


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_it_approaches_the_truth_with_many_replicates(seed):
    truth = 0.8 ** np.abs(np.subtract.outer(np.arange(5), np.arange(5)))
    generator = np.random.default_rng(seed)
    values = generator.multivariate_normal(np.zeros(5), truth, size=40_000)
    # an element's standard error is (1 − ρ²)/√n; shrinkage is of order 1/n
    errors = np.maximum(1 - truth**2, 1e-9) / 200
    assert (np.abs(shrunk_correlation(values) - truth) < 5 * errors).all()


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_it_is_nearer_to_the_truth_than_the_sample(seed):
    generator = np.random.default_rng(seed)
    shrunk, sample = [], []
    for _ in range(50):
        values = generator.normal(size=(15, 12))
        shrunk.append(((shrunk_correlation(values) - np.eye(12)) ** 2).sum())
        sample.append(((np.corrcoef(values.T) - np.eye(12)) ** 2).sum())
    assert np.mean(shrunk) < np.mean(sample) / 4


def is_correlation(matrix):
    np.testing.assert_array_equal(np.diagonal(matrix), 1)
    np.testing.assert_allclose(matrix, matrix.T, rtol=0, atol=1e-15)
    np.linalg.cholesky(matrix)  # raises if not positive definite
    return True


@pytest.mark.parametrize("count", [2, 3, 4, 5])
def test_few_replicates(count):
    for seed in range(50):
        values = mixed_values(np.random.default_rng(seed), count, 15)
        assert is_correlation(shrunk_correlation(values))
        copies = shrunk_correlation_copies(values)
        assert copies.shape == (1 + count, 15, 15)
        assert all(is_correlation(copy) for copy in copies)
        if count < 4:
            assert (copies == np.eye(15)).all()


def test_of_two_replicates_nothing_is_known():
    np.testing.assert_array_equal(shrunk_correlation(np.array([[0.0, 1, 5], [1, 3, 2]])), np.eye(3))


@pytest.mark.parametrize("constant", [0.0, 0.1, -1e9])
def test_a_column_that_does_not_vary_is_uncorrelated_and_changes_nothing_else(constant):
    values = mixed_values(np.random.default_rng(1), 7, 5)
    with_it = np.insert(values, 2, constant, axis=1)
    found = shrunk_correlation(with_it)
    assert is_correlation(found)
    np.testing.assert_array_equal(found[2], np.eye(6)[2])
    kept = [0, 1, 3, 4, 5]
    np.testing.assert_allclose(found[np.ix_(kept, kept)], shrunk_correlation(values), rtol=1e-13)


def test_a_column_that_varies_in_one_replicate_only():
    values = mixed_values(np.random.default_rng(1), 7, 5)
    values[1:, 3] = 0.1
    copies = shrunk_correlation_copies(values)
    assert all(is_correlation(copy) for copy in copies)
    assert (copies[0, 3, [0, 1, 2, 4]] != 0).all()
    np.testing.assert_array_equal(copies[1, 3], np.eye(5)[3])  # without that replicate


def test_nothing_varies():
    copies = shrunk_correlation_copies(np.full((6, 4), 0.3))
    assert (copies == np.eye(4)).all()


def test_equal_columns_stay_positive_definite():
    # of ±1 the fourth moments leave no noise at all: the sample matrix would be taken as it is
    signs = np.tile(np.array([[1.0], [-1], [1], [-1]]), 3)
    assert is_correlation(shrunk_correlation(signs))
    assert shrunk_correlation(signs)[0, 1] == pytest.approx(1, abs=2 * SMALLEST_WEIGHT)
    repeated = np.tile(np.random.default_rng(1).normal(size=(20, 1)), 10)
    assert is_correlation(shrunk_correlation(repeated))


def test_a_single_column():
    assert shrunk_correlation(np.random.default_rng(1).normal(size=(9, 1))) == 1
