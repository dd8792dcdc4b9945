"""The typical finite order: Kleitman & Rothschild 1975."""

import numpy as np
import pytest

from conetone.operators.causal import causal_matrix
from conetone.sprinkle.layered import kleitman_rothschild

SIZES = (300, 600)
SEEDS = range(20)


@pytest.fixture(scope="module")
def orders():
    """Orders by size, one for each seed."""
    return {n: [kleitman_rothschild(n, np.random.default_rng([n, seed])) for seed in SEEDS] for n in SIZES}


def mean_and_error(samples):
    samples = np.asarray(samples, dtype=float)
    return samples.mean(axis=0), samples.std(axis=0, ddof=1) / np.sqrt(len(samples))


def test_leading_singular_values(orders):
    # (√3 ± 1)/8 · n: derived here from the mean matrix, blocks of ½, ½ and 1 between layers n/4, n/2, n/4:
    # s₁ s₂ = n²/32 and s₁² + s₂² = n²/8. Confirmed by simulation at n = 800.
    expected = (np.sqrt(3) + np.array([1, -1])) / 8
    np.testing.assert_allclose(expected, [0.341506, 0.091506], atol=5e-7)
    found = {
        n: mean_and_error(
            [np.linalg.svd(causal_matrix(order), compute_uv=False)[:2] / n for order in orders[n]]
        )
        for n in SIZES
    }
    # The randomness of the blocks shifts both by order one, c/n here; two sizes in the ratio 2 remove it.
    (small, small_error), (large, large_error) = (found[n] for n in SIZES)
    limit, error = 2 * large - small, np.hypot(2 * large_error, small_error)
    assert (np.abs(limit - expected) < 5 * error).all()
    assert (error < 0.005 * expected).all()  # the comparison is one to half a per cent


def test_ordering_fraction(orders):
    for n in SIZES:
        quarter, half = n // 4, n // 2
        # bottom and top are related unless none of the n/2 middle elements lies between, (3/4)^(n/2)
        pairs = quarter * half + quarter**2 * (1 - 0.75**half)
        mean, error = mean_and_error([order.ordering_fraction for order in orders[n]])
        assert abs(mean - pairs / (n * (n - 1) / 2)) < 5 * error
        assert abs(mean - 3 / 8) < 5 * error + 1 / n
