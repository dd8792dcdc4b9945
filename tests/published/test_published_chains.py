"""Chains in flat diamonds against Myrheim 1978 (CERN-TH-2538) and Meyer 1988 (MIT thesis)."""

from fractions import Fraction
from math import perm

import numpy as np
import pytest

from conetone.operators.causal import causal_matrix
from conetone.reference.flat import chain_coefficient, ordering_fraction_of_diamond
from conetone.sprinkle.minkowski import minkowski_diamond
from conetone.stages.sprinkle import draw
from conetone.sweep.points import EnsembleChoice, Point

# χ₂ and χ₃ by dimension. Meyer 1988; confirmed numerically, as rationals, from memory.
CHI_2 = {
    2: Fraction(1, 4),
    3: Fraction(4, 35),
    4: Fraction(1, 20),
    5: Fraction(64, 3003),
    6: Fraction(1, 112),
    7: Fraction(512, 138567),
}
CHI_3 = {
    2: Fraction(1, 36),
    3: Fraction(2, 525),
    4: Fraction(1, 2100),
    5: Fraction(32, 567567),
    6: Fraction(1, 155232),
    7: Fraction(128, 178335729),
}
# Myrheim 1978; Meyer 1988: 2 χ₂ to six figures.
ORDERING_FRACTION = {2: 0.5, 3: 0.228571, 4: 0.1, 5: 0.0426240, 6: 0.0178571, 7: 0.00738993}

ELEMENTS = 128
ORDERS = 60
SEEDS = (1, 2, 3)


def deviation(samples, expected):
    """Mean less expectation, in standard errors of the mean."""
    samples = np.asarray(samples, dtype=float)
    return (samples.mean() - expected) / (samples.std(ddof=1) / np.sqrt(len(samples)))


def numbers_of_chains(order):
    """Relations, 2-chains and 3-chains; the number of k-chains is the sum of the entries of C^(k − 1)."""
    matrix = causal_matrix(order)
    return order.relations, matrix.sum(), (matrix @ matrix).sum()


@pytest.mark.parametrize("dimension", range(2, 8))
def test_closed_form_gives_the_printed_table(dimension):
    assert chain_coefficient(dimension, 1) == pytest.approx(1, rel=1e-14)
    assert chain_coefficient(dimension, 2) == pytest.approx(float(CHI_2[dimension]), rel=1e-13)
    assert chain_coefficient(dimension, 3) == pytest.approx(float(CHI_3[dimension]), rel=1e-13)
    assert ordering_fraction_of_diamond(dimension) == pytest.approx(
        ORDERING_FRACTION[dimension], rel=5e-6
    )  # six figures


def test_chains_in_two_dimensions_are_those_of_a_random_permutation():
    # Derived here: k random elements of the two-dimensional order form a chain if two permutations agree,
    # probability 1/k!; C(n, k)/k! k-chains with n elements, so χ_k = 1/(k!)².
    for length, factorial in enumerate((1, 2, 6, 24, 120, 720), 1):
        assert chain_coefficient(2, length) == pytest.approx(factorial**-2, rel=1e-13)


@pytest.mark.parametrize("seed", SEEDS)
@pytest.mark.parametrize("dimension", range(2, 8))
def test_chains_with_a_fixed_number_of_elements(dimension, seed):
    generator = np.random.default_rng([dimension, seed])
    orders = [minkowski_diamond(ELEMENTS, generator, dimension=dimension) for _ in range(ORDERS)]
    relations, pairs, triples = np.array([numbers_of_chains(order) for order in orders]).T
    np.testing.assert_array_equal(relations, pairs)
    assert abs(deviation(pairs, perm(ELEMENTS, 2) * float(CHI_2[dimension]))) < 5
    assert abs(deviation(triples, perm(ELEMENTS, 3) * float(CHI_3[dimension]))) < 5
    fractions = [order.ordering_fraction for order in orders]
    assert abs(deviation(fractions, 2 * float(CHI_2[dimension]))) < 5


@pytest.mark.parametrize("root_seed", SEEDS)
@pytest.mark.parametrize("dimension", range(2, 8))
def test_chains_with_a_poisson_number_of_elements(dimension, root_seed):
    choice = EnsembleChoice("minkowski-diamond", (("dimension", dimension),), "poisson")
    orders = [draw(Point(choice, ELEMENTS), root_seed, replicate) for replicate in range(ORDERS)]
    counts = np.array([order.elements for order in orders])
    _, pairs, triples = np.array([numbers_of_chains(order) for order in orders]).T
    assert abs(counts.mean() - ELEMENTS) < 5 * np.sqrt(ELEMENTS / ORDERS)
    # the variance of a Poisson count equals its mean; its estimate scatters by about √(2/m)
    assert abs(counts.var(ddof=1) / ELEMENTS - 1) < 5 * np.sqrt((2 + 1 / ELEMENTS) / ORDERS)
    assert abs(deviation(pairs, ELEMENTS**2 * float(CHI_2[dimension]))) < 5
    assert abs(deviation(triples, ELEMENTS**3 * float(CHI_3[dimension]))) < 5
