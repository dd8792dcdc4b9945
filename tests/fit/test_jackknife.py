"""The jackknife against the textbook."""

import statistics
from math import sqrt

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from conetone.fit.logs import standard_error
from conetone.fit.resample import jackknife_variance

samples = st.lists(st.floats(-100, 100), min_size=2, max_size=30)


@given(samples)
def test_of_the_mean_it_is_the_squared_standard_error(values):
    copies = [statistics.fmean(values[:i] + values[i + 1 :]) for i in range(len(values))]
    expected = statistics.variance(values) / len(values)
    assert jackknife_variance(np.array(copies)) == pytest.approx(expected, rel=1e-6, abs=1e-9)


@given(samples)
def test_standard_error(values):
    expected = statistics.stdev(values) / sqrt(len(values))
    assert standard_error(np.array(values)) == pytest.approx(expected, rel=1e-9, abs=1e-10)


def test_of_a_table_it_is_that_of_each_column():
    copies = np.random.default_rng(1).normal(size=(12, 3, 2))
    found = jackknife_variance(copies)
    for i in range(3):
        for j in range(2):
            plain = 11 / 12 * sum((c - copies[:, i, j].mean()) ** 2 for c in copies[:, i, j])
            assert found[i, j] == pytest.approx(plain, rel=1e-12)


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_of_a_ratio_it_is_what_repetition_shows(seed):
    # the ratio of means of two correlated quantities, against its scatter over 2000 repeated samples
    generator = np.random.default_rng(seed)
    common = generator.normal(size=(2000, 40))
    above, below = 3 + common + generator.normal(size=common.shape), 5 + common
    ratios = above.mean(axis=1) / below.mean(axis=1)
    copies = (above.sum(axis=1, keepdims=True) - above) / (below.sum(axis=1, keepdims=True) - below)
    variances = jackknife_variance(copies.T)
    error = np.hypot(ratios.var() * np.sqrt(2 / len(ratios)), variances.std(ddof=1) / np.sqrt(len(variances)))
    # its bias is of relative order 1/m: upwards (Efron & Stein 1981)
    assert -5 * error < variances.mean() - ratios.var(ddof=1) < 5 * error + 2 / 40 * ratios.var()
