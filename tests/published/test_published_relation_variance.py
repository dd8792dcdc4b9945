"""Variance of the number of relations in flat diamonds."""

import numpy as np
import pytest

from conetone.reference.flat import chain_coefficient
from conetone.sprinkle.minkowski import minkowski_diamond

# E[g²], g the probability that a given point of the diamond is related to a random one. Derived here
# (Hoeffding decomposition of the pair count), confirmed by an independent simulation.
MEAN_SQUARE_SHARE = {2: 5 / 18, 3: 13 / 175, 4: 1 / 50}
ELEMENTS = 40
ORDERS = 1200


def variance_with_error(samples):
    """Sample variance and its standard error, from the fourth central moment."""
    samples = np.asarray(samples, dtype=float)
    count, variance = len(samples), samples.var(ddof=1)
    fourth = ((samples - samples.mean()) ** 4).mean()
    return variance, np.sqrt((fourth - variance**2 * (count - 3) / (count - 1)) / count)


def expected_variance(dimension, n):
    """n(n − 1)[(n − 2) ζ₁ + ζ₂/2], ζ₁ = E[g²] − 4 χ₂² = 1/36, 27/1225, 1/100 and ζ₂ = 2 χ₂ (1 − 2 χ₂)."""
    fraction = 2 * chain_coefficient(dimension, 2)
    one_shared = MEAN_SQUARE_SHARE[dimension] - fraction**2
    return n * (n - 1) * ((n - 2) * one_shared + fraction * (1 - fraction) / 2)


def test_the_general_formula_in_two_dimensions_is_that_of_inversions():
    # The variance of the number of inversions of a random permutation (classical; Kendall 1938).
    for n in range(2, 50):
        assert expected_variance(2, n) == pytest.approx(n * (n - 1) * (2 * n + 5) / 72, rel=1e-12)


@pytest.mark.parametrize("seed", [1, 2, 3])
@pytest.mark.parametrize("dimension", [2, 3, 4])
def test_variance_with_a_fixed_number_of_elements(dimension, seed):
    generator = np.random.default_rng([dimension, seed])
    relations = [minkowski_diamond(ELEMENTS, generator, dimension=dimension).relations for _ in range(ORDERS)]
    variance, error = variance_with_error(relations)
    assert abs(variance - expected_variance(dimension, ELEMENTS)) < 5 * error


@pytest.mark.parametrize("seed", [1, 2, 3])
@pytest.mark.parametrize("dimension", [2, 3, 4])
def test_variance_with_a_poisson_number_of_elements(dimension, seed):
    # N³ E[g²] + N² χ₂: derived here (Mecke's formula for pairs of a Poisson process).
    generator = np.random.default_rng([dimension, seed, 1])
    relations = [
        minkowski_diamond(generator.poisson(ELEMENTS), generator, dimension=dimension).relations
        for _ in range(ORDERS)
    ]
    expected = ELEMENTS**3 * MEAN_SQUARE_SHARE[dimension] + ELEMENTS**2 * chain_coefficient(dimension, 2)
    variance, error = variance_with_error(relations)
    assert abs(variance - expected) < 5 * error
