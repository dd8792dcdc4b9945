"""Which eigenvalues are ranked."""

import numpy as np
import pytest

from conetone.diagonalise.full import full_spectrum
from conetone.fit.ranking import ranked_magnitudes
from conetone.operators.catalogue import PARTS
from conetone.operators.causal import causal_matrix
from conetone.sprinkle.layered import kleitman_rothschild
from conetone.sprinkle.minkowski import minkowski_diamond


def test_the_positive_half_of_an_antisymmetric_part():
    eigenvalues = np.array([-5.0, -2.0, -0.5, 0.0, 0.5, 2.0, 5.0])
    np.testing.assert_array_equal(ranked_magnitudes(eigenvalues, "antisymmetric"), [5, 2, 0.5])


def test_all_magnitudes_of_a_symmetric_part():
    eigenvalues = np.array([-3.0, -2.0, 0.0, 0.5, 4.5])
    np.testing.assert_array_equal(ranked_magnitudes(eigenvalues, "symmetric"), [4.5, 3, 2, 0.5])


def test_one_sign_of_a_symmetric_part():
    eigenvalues = np.array([-3.0, -2.0, 0.0, 0.5, 4.5])
    np.testing.assert_array_equal(ranked_magnitudes(eigenvalues, "symmetric-positive"), [4.5, 0.5])
    np.testing.assert_array_equal(ranked_magnitudes(eigenvalues, "symmetric-negative"), [3, 2])


def test_singular_values_fall_and_zeros_among_them_are_left_out():
    eigenvalues = np.array([0.0, 1e-16, 0.5, 2.0, 2.0, 7.0])
    np.testing.assert_array_equal(ranked_magnitudes(eigenvalues, "singular"), [7, 2, 2, 0.5])
    np.testing.assert_array_equal(ranked_magnitudes(eigenvalues, "singular", count=2), [7, 2])


@pytest.mark.parametrize("part", PARTS)
def test_zeros_to_rounding_are_left_out(part):
    largest, rounding = 100.0, 6 * 2**-52 * 100
    eigenvalues = np.array([-largest, -rounding / 2, 0.0, rounding / 2, 2 * rounding, largest])
    found = ranked_magnitudes(eigenvalues, part)
    assert found.min() == (largest if part == "symmetric-negative" else 2 * rounding)
    assert len(found) == {"symmetric": 3, "symmetric-negative": 1}.get(part, 2)


def test_rounding_is_that_of_the_larger_sign():
    """Of a chain, C + Cᵀ has n − 1 once and −1; what is zero to the one is zero to the other."""
    eigenvalues = np.array([-1e-13, -5e-15, 0.0, 100.0])
    np.testing.assert_array_equal(ranked_magnitudes(eigenvalues, "symmetric-negative"), [1e-13])
    assert len(ranked_magnitudes(eigenvalues, "symmetric-negative", tolerance=1e-9)) == 0


@pytest.mark.parametrize("part", PARTS)
def test_nothing_is_ranked_where_nothing_is(part):
    assert ranked_magnitudes(np.empty(0), part).shape == (0,)
    assert ranked_magnitudes(np.zeros(7), part).shape == (0,)


def test_ranks_of_an_antisymmetric_part_count_half_its_rank():
    # the numerical rank of the real matrix, from its singular values
    for seed in range(10):
        for order in (
            kleitman_rothschild(41, np.random.default_rng(seed)),
            minkowski_diamond(41, np.random.default_rng(seed), dimension=2),
        ):
            matrix = causal_matrix(order)
            magnitudes = ranked_magnitudes(
                full_spectrum(matrix, "antisymmetric").eigenvalues, "antisymmetric"
            )
            assert 2 * len(magnitudes) == np.linalg.matrix_rank(matrix - matrix.T)


def plain_ranks_of_ends(eigenvalues, count):
    """Magnitudes in falling order, as long as the next one must be among the ends."""
    falling = sorted(eigenvalues, key=abs, reverse=True)
    found = []
    for value in falling:
        if sum(1 for v in found if v > 0) == count or sum(1 for v in found if v < 0) == count:
            break  # another one of this sign might come next and be missing
        found.append(value)
    return [abs(value) for value in found]


def test_the_ends_of_a_symmetric_part_are_ranked_as_far_as_none_is_missing():
    """What is ranked of the ends is ranked first of the whole spectrum: count magnitudes at least."""
    generator = np.random.default_rng(5)
    for _ in range(500):
        n, count = int(generator.integers(1, 60)), int(generator.integers(1, 12))
        eigenvalues = np.sort(generator.standard_normal(n) + generator.normal())
        ends = eigenvalues if n <= 2 * count else np.r_[eigenvalues[:count], eigenvalues[-count:]]
        found = ranked_magnitudes(ends, "symmetric", count=count)
        np.testing.assert_array_equal(found, plain_ranks_of_ends(eigenvalues, count))
        np.testing.assert_array_equal(found, ranked_magnitudes(eigenvalues, "symmetric")[: len(found)])
        assert len(found) >= min(count, n)


def test_the_ends_of_one_sign_are_ranked_as_far_as_there_are():
    generator = np.random.default_rng(7)
    for _ in range(500):
        n, count = int(generator.integers(1, 60)), int(generator.integers(1, 12))
        eigenvalues = np.sort(generator.standard_normal(n) + 2 * generator.normal())
        ends = eigenvalues if n <= 2 * count else np.r_[eigenvalues[:count], eigenvalues[-count:]]
        for sign, part in ((1, "symmetric-positive"), (-1, "symmetric-negative")):
            of_sign = sorted((abs(value) for value in eigenvalues if sign * value > 0), reverse=True)
            found = ranked_magnitudes(ends, part, count=count)
            np.testing.assert_array_equal(found, of_sign[:count])


def test_the_ends_of_an_antisymmetric_part_are_its_largest_pairs():
    generator = np.random.default_rng(6)
    for _ in range(100):
        pairs, count = int(generator.integers(1, 30)), int(generator.integers(1, 12))
        positive = np.sort(generator.random(pairs))
        eigenvalues = np.r_[-positive[::-1], positive]
        ends = eigenvalues if pairs <= count else np.r_[eigenvalues[:count], eigenvalues[-count:]]
        found = ranked_magnitudes(ends, "antisymmetric", count=count)
        np.testing.assert_array_equal(found, positive[::-1][:count])


@pytest.mark.parametrize("part", PARTS)
def test_what_is_below_the_tolerance_is_left_out(part):
    eigenvalues = np.array([-100.0, -2e-7, -0.5e-7, 0.5e-7, 2e-7, 100.0])
    found = ranked_magnitudes(eigenvalues, part, count=3, tolerance=1e-9)
    assert found.min() == 2e-7
    assert len(found) == (4 if part == "symmetric" else 2)
