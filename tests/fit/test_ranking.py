"""Which eigenvalues are ranked, and their averages over bins."""

from math import log

import numpy as np
import pytest

from conetone.diagonalise.full import full_spectrum
from conetone.fit.ranking import BinnedLogs, bin_logs, ranked_magnitudes
from conetone.fit.windows import RankBins
from conetone.operators.causal import causal_matrix
from conetone.sprinkle.layered import kleitman_rothschild
from conetone.sprinkle.minkowski import minkowski_diamond


def test_the_positive_half_of_an_antisymmetric_part():
    eigenvalues = np.array([-5.0, -2.0, -0.5, 0.0, 0.5, 2.0, 5.0])
    np.testing.assert_array_equal(ranked_magnitudes(eigenvalues, "antisymmetric"), [5, 2, 0.5])


def test_all_magnitudes_of_a_symmetric_part():
    eigenvalues = np.array([-3.0, -2.0, 0.0, 0.5, 4.5])
    np.testing.assert_array_equal(ranked_magnitudes(eigenvalues, "symmetric"), [4.5, 3, 2, 0.5])


@pytest.mark.parametrize("part", ["symmetric", "antisymmetric"])
def test_zeros_to_rounding_are_left_out(part):
    largest, rounding = 100.0, 6 * 2**-52 * 100
    eigenvalues = np.array([-largest, -rounding / 2, 0.0, rounding / 2, 2 * rounding, largest])
    found = ranked_magnitudes(eigenvalues, part)
    assert found.min() == 2 * rounding
    assert len(found) == {"symmetric": 3, "antisymmetric": 2}[part]


@pytest.mark.parametrize("part", ["symmetric", "antisymmetric"])
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


def test_logs_are_averaged_over_bins():
    generator = np.random.default_rng(1)
    spectra = [np.sort(generator.random(length))[::-1] for length in (20, 25, 31)]
    bins = RankBins((2, 3, 7, 20))
    found = bin_logs(spectra, bins)
    assert found.values.shape == (3, 3)
    for replicate, spectrum in enumerate(spectra):
        for b, ranks in enumerate((range(2, 3), range(3, 7), range(7, 20))):
            plain = sum(log(spectrum[rank - 1]) for rank in ranks) / len(ranks)
            assert found.values[replicate, b] == pytest.approx(plain, rel=1e-12)
    np.testing.assert_allclose(found.mean, [sum(column) / 3 for column in found.values.T], rtol=1e-12)
    plain = [np.sqrt(sum((v - sum(c) / 3) ** 2 for v in c) / 2 / 3) for c in found.values.T]
    np.testing.assert_allclose(found.error, plain, rtol=1e-10)


def test_binned_logs_are_read_only():
    found = BinnedLogs(RankBins((1, 2, 3)), np.zeros((2, 2)))
    with pytest.raises(ValueError, match="read-only"):
        found.values[0, 0] = 1
