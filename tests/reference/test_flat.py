"""Chain coefficients of flat diamonds against integrals done another way."""

import numpy as np
import pytest

from conetone.reference.flat import chain_coefficient, ordering_fraction_of_diamond
from conetone.sprinkle.minkowski import diamond_points


@pytest.mark.parametrize("dimension", range(2, 8))
def test_ordering_fraction_is_an_integral_over_the_smaller_diamond(dimension):
    # The share of a point's past: its diamond with the bottom tip has volume ∝ (proper time)^d. Derived here:
    # χ₂ is the mean of ((1 + t)² − r²)^(d/2)/2^d over |t| + r ≤ 1; Gauss–Legendre over the triangle.
    nodes, weights = np.polynomial.legendre.leggauss(60)
    time_weights = weights[:, np.newaxis]
    total = volume = 0.0
    for sign in (-1, 1):  # the kink at t = 0 needs one rule on either side
        times = sign * (nodes[:, np.newaxis] + 1) / 2
        largest = 1 - np.abs(times)
        radii, radius_weights = largest * (nodes + 1) / 2, weights * largest / 2
        measure = time_weights / 2 * radius_weights * radii ** (dimension - 2)
        total += (measure * ((1 + times) ** 2 - radii**2) ** (dimension / 2)).sum() / 2**dimension
        volume += measure.sum()
    assert chain_coefficient(dimension, 2) == pytest.approx(total / volume, rel=1e-5)


def test_two_dimensional_fraction_is_one_half():
    assert ordering_fraction_of_diamond(2) == pytest.approx(0.5, rel=1e-14)


@pytest.mark.parametrize("dimension", range(2, 8))
def test_ordering_fraction_is_twice_the_second_coefficient(dimension):
    assert ordering_fraction_of_diamond(dimension) == 2 * chain_coefficient(dimension, 2)


@pytest.mark.parametrize("dimension", range(2, 7))
def test_coefficients_fall_with_dimension_and_length(dimension):
    for length in range(2, 7):
        assert chain_coefficient(dimension + 1, length) < chain_coefficient(dimension, length)
        # every (k + 1)-chain holds k + 1 k-chains
        assert chain_coefficient(dimension, length + 1) < chain_coefficient(dimension, length)


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_four_chains_by_monte_carlo(seed):
    # random quadruples of points sorted by time, related in sequence
    generator = np.random.default_rng(seed)
    for dimension in (2, 3):
        points = diamond_points(4 * 200_000, generator, dimension).reshape(-1, 4, dimension)
        points = np.take_along_axis(points, np.argsort(points[:, :, :1], axis=1), axis=1)
        steps = np.diff(points, axis=1)
        related = steps[:, :, 0] >= np.linalg.norm(steps[:, :, 1:], axis=2)
        share = related.all(axis=1).mean()
        # n!/(n − 4)! χ₄ expected chains among C(n, 4) quadruples
        expected = 24 * chain_coefficient(dimension, 4)
        assert abs(share - expected) < 5 * np.sqrt(expected / 200_000)
