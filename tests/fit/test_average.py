"""Weights of windows and models against their formula, written as loops."""

from math import exp

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from conetone.fit.average import information_criterion, weights_of


def plain_criterion(chi2, parameters, bins_cut):
    """For one copy: χ² + 2 k + 2 n_cut, averaged over the sizes that have a fit; ∞ without the last."""
    found = []
    for c, count in enumerate(parameters):
        terms = [
            chi2[s][c] + 2 * count + 2 * bins_cut[s][c] for s in range(len(chi2)) if np.isfinite(chi2[s][c])
        ]
        found.append(sum(terms) / len(terms) if np.isfinite(chi2[-1][c]) else np.inf)
    return found


def test_criterion():
    for seed in range(100):
        generator = np.random.default_rng(seed)
        copies, sizes, candidates = generator.integers(1, 6, 3)
        chi2 = generator.chisquare(5, size=(copies, sizes, candidates))
        chi2[:, generator.random((sizes, candidates)) < 0.3] = np.nan
        bins_cut = generator.integers(0, 8, size=(sizes, candidates)).astype(float)
        parameters = generator.integers(2, 4, candidates).astype(float)
        found = information_criterion(chi2, parameters, bins_cut)
        assert found.shape == (copies, candidates)
        for copy in range(copies):
            plain = plain_criterion(chi2[copy].tolist(), parameters.tolist(), bins_cut.tolist())
            np.testing.assert_allclose(found[copy], plain, rtol=1e-12)


criteria = st.lists(st.one_of(st.floats(0, 1000), st.just(float("inf"))), min_size=1, max_size=8)


@given(criteria)
def test_weights(values):
    weights = weights_of(np.array(values), axis=0)
    if not np.isfinite(values).any():
        assert np.isnan(weights).all()
        return
    raw = [exp(-(value - min(values)) / 2) for value in values]
    np.testing.assert_allclose(weights, [r / sum(raw) for r in raw], rtol=1e-12)
    assert weights.sum() == pytest.approx(1)
    assert (weights[np.isinf(values)] == 0).all()


@given(criteria, st.floats(-1e4, 1e4))
def test_only_differences_of_the_criterion_matter(values, shift):
    values = np.array(values)
    before, after = weights_of(values, axis=0), weights_of(values + shift, axis=0)
    np.testing.assert_allclose(after, before, rtol=1e-9, atol=1e-12)


def test_weights_over_two_axes_are_normalised_together():
    values = np.random.default_rng(1).uniform(0, 5, size=(3, 4, 5))
    weights = weights_of(values, axis=(1, 2))
    for copy in range(3):
        flat = weights_of(values[copy].ravel(), axis=0)
        np.testing.assert_allclose(weights[copy].ravel(), flat, rtol=1e-12)


def test_two_units_cost_a_factor_e():
    assert weights_of(np.array([3.0, 5.0]), axis=0)[0] == pytest.approx(1 / (1 + exp(-1)))
