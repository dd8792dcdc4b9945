"""Expected numbers of links and small intervals in flat diamonds."""

import numpy as np
import pytest

from conetone.operators.causal import causal_matrix
from conetone.sprinkle.minkowski import minkowski_diamond

# Expected links of a Poisson sprinkling of N elements: integrals of the interval abundances as in Glaser &
# Surya 2013 (PRD 88 124026), derived here and confirmed by an independent simulation.
POISSON_LINKS = {
    (2, 100): 324.421,
    (3, 100): 454.007,
    (4, 100): 340.498,
    (2, 1000): 5493.456,
    (3, 1000): 14958.02,
    (4, 1000): 17803.47,
}
# Intervals with m = 0 … 4 interior elements, d = 2, Poisson N = 100; same source and standing.
POISSON_INTERVALS = (324.4210, 229.6034, 184.2857, 155.3015, 134.4005)


def deviation(samples, expected):
    """Mean less expectation, in standard errors of the mean; along axis 0."""
    samples = np.asarray(samples, dtype=float)
    return (samples.mean(axis=0) - expected) / (samples.std(axis=0, ddof=1) / np.sqrt(len(samples)))


@pytest.mark.parametrize("seed", [1, 2, 3])
@pytest.mark.parametrize("elements", [2, 3, 10, 65, 200])
def test_links_in_two_dimensions(elements, seed):
    # Derived here: among m = j − i + 1 elements of a random permutation the first and the last are linked if
    # their values are neighbours in rank, and rise: probability 1/m. Σ_m (n + 1 − m)/m = (n + 1) H_n − 2n.
    expected = (elements + 1) * sum(1 / k for k in range(1, elements + 1)) - 2 * elements
    generator = np.random.default_rng([elements, seed])
    links = [minkowski_diamond(elements, generator, dimension=2).links.pairs for _ in range(150)]
    assert abs(deviation(links, expected)) < 5


@pytest.mark.parametrize(("dimension", "mean"), POISSON_LINKS)
def test_links_of_poisson_sprinklings(dimension, mean):
    for seed in range(3):
        generator = np.random.default_rng([dimension, mean, seed])
        orders = (
            minkowski_diamond(generator.poisson(mean), generator, dimension=dimension)
            for _ in range(100 if mean == 100 else 12)
        )
        assert abs(deviation([order.links.pairs for order in orders], POISSON_LINKS[dimension, mean])) < 5


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_small_intervals_of_poisson_sprinklings(seed):
    generator = np.random.default_rng(seed)
    counts = []
    for _ in range(150):
        order = minkowski_diamond(generator.poisson(100), generator, dimension=2)
        counts.append(order.interval_counts(4))
        matrix = causal_matrix(order)
        interior = (matrix @ matrix)[matrix == 1].astype(int)
        np.testing.assert_array_equal(counts[-1], np.bincount(interior, minlength=5)[:5])
    assert np.abs(deviation(counts, POISSON_INTERVALS)).max() < 5
