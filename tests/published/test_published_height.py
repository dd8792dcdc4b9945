"""Longest chains of two-dimensional orders are longest increasing subsequences."""

from bisect import bisect_left

import numpy as np
import pytest

from conetone.sprinkle.minkowski import diamond_points, minkowski_diamond, order_of_points
from conetone.sprinkle.order import Order


def longest_increasing_subsequence(values):
    """Its length, by patience sorting: the number of piles (Aldous & Diaconis 1999)."""
    tops = []
    for value in values:
        pile = bisect_left(tops, value)
        tops[pile : pile + 1] = [value]
    return len(tops)


def order_of_permutation(permutation):
    """i before j if i < j and permutation[i] < permutation[j]."""
    return Order.from_matrix(np.triu(permutation[:, np.newaxis] < permutation, 1))


def test_height_of_the_order_of_a_permutation():
    for seed in range(300):
        generator = np.random.default_rng(seed)
        permutation = generator.permutation(int(generator.integers(0, 150)))
        order = order_of_permutation(permutation)
        assert order.height == longest_increasing_subsequence(permutation.tolist())


def test_height_of_the_sorted_and_of_the_reversed_permutation():
    for n in (0, 1, 2, 64, 65):
        assert order_of_permutation(np.arange(n)).height == n
        assert order_of_permutation(np.arange(n)[::-1]).height == min(n, 1)


@pytest.mark.parametrize("elements", [0, 1, 2, 63, 64, 65, 300])
def test_height_of_a_sprinkling_is_that_of_its_light_cone_permutation(elements):
    # i precedes j exactly if both light-cone coordinates t ± x rise.
    for seed in range(5):
        points = diamond_points(elements, np.random.default_rng([elements, seed]), 2)
        outgoing, ingoing = points[:, 0] - points[:, 1], points[:, 0] + points[:, 1]
        permutation = ingoing[np.argsort(outgoing)]
        assert order_of_points(points).height == longest_increasing_subsequence(permutation.tolist())


def test_mean_and_variance_of_the_height_in_two_dimensions():
    # Baik, Deift & Johansson 1999; the constants after the leading terms: Bornemann 2022. At n = 1000 the
    # next terms of his expansion, of order n^(−1/6) and n^(−1/3), make them 58.166 and 6.98.
    n = 1000
    mean, variance = 58.166, 6.98
    assert 2 * n**0.5 - 1.771087 * n ** (1 / 6) + 0.5 == pytest.approx(mean, abs=0.1 * n ** (-1 / 6))
    assert 0.813195 * n ** (1 / 3) - 1.2072 == pytest.approx(variance, abs=n ** (-1 / 3))
    for seed in range(3):
        generator = np.random.default_rng(seed)
        heights = np.array([minkowski_diamond(n, generator, dimension=2).height for _ in range(100)])
        assert abs(heights.mean() - mean) < 5 * np.sqrt(variance / len(heights))
        fourth = ((heights - heights.mean()) ** 4).mean()
        sample = heights.var(ddof=1)
        assert abs(sample - variance) < 5 * np.sqrt((fourth - sample**2) / len(heights))
