"""Amplitudes at infinite size: synthetic ones with known limits, and the exact law of the plane."""

import numpy as np
import pytest
from scipy.integrate import quad

from conetone.aggregate.amplitudes import amplitudes_at_infinite_size, finite_size_coefficient
from conetone.diagonalise.leading import leading_spectrum
from conetone.errors import InputError
from conetone.operators.catalogue import OPERATORS
from conetone.reference.amplitudes import expected_amplitude
from conetone.sprinkle.minkowski import minkowski_diamond

SIZES = (200, 300, 450, 675, 1000)
SEEDS = (1, 2, 3)
RANKS = 8


def with_copies(replicates):
    """The mean of (replicates, ranks), then the means without each replicate."""
    return np.array(
        [replicates.mean(axis=0), *(np.delete(replicates, i, 0).mean(axis=0) for i in range(len(replicates)))]
    )


def synthetic(generator, limit, coefficient, bend, replicates):
    """Replicates of log(s/n), correlated between ranks, scattered by about n^(−1/2)."""
    logs = []
    for n in SIZES:
        mean = limit + coefficient / n + bend / n**2
        noise = 0.8 * generator.normal(size=(replicates, len(limit))) + 0.6 * generator.normal(
            size=(replicates, 1)
        )
        logs.append(mean + noise / np.sqrt(n))
    return logs


def reference(sizes, replicates, cuts):
    """Value and coefficient of one rank, form by form, by numpy's least squares; then the same averages."""
    x, y = 1 / np.array(sizes), np.array([each.mean() for each in replicates])
    errors = np.array([each.std(ddof=1) / np.sqrt(len(each)) for each in replicates])
    found, criteria = [], []
    for terms in (2, 3):
        for cut in range(cuts + 1):
            if len(x) - cut > terms:
                line = np.polyfit(x[cut:], y[cut:], terms - 1, w=1 / errors[cut:])
                chi2 = (((y - np.polyval(line, x)) / errors)[cut:] ** 2).sum()
                found.append(line[::-1][:2])
                criteria.append(chi2 + 2 * terms + 2 * cut)
    weights = np.exp(-(np.array(criteria) - min(criteria)) / 2)
    weights /= weights.sum()
    mean = weights @ np.array(found)
    return mean, np.sqrt(weights @ (np.array(found) - mean) ** 2)


def test_every_copy_is_fitted_as_a_plain_program_would():
    generator = np.random.default_rng(1)
    for cuts in (0, 1, 2, 5):
        counts = generator.integers(4, 8, size=len(SIZES))
        ranks = 3
        data = [generator.normal(size=(count, ranks)) for count in counts]
        found = amplitudes_at_infinite_size(SIZES, [with_copies(each) for each in data], cuts)
        for rank in range(ranks):
            samples = [each[:, rank] for each in data]
            mean, spread = reference(SIZES, samples, cuts)
            assert (found.value[rank], found.coefficient[rank]) == pytest.approx(tuple(mean), rel=1e-7)
            assert (found.systematic[rank], found.coefficient_systematic[rank]) == pytest.approx(
                tuple(spread), rel=1e-7
            )
            variance, at = np.zeros(2), 0
            for s, sample in enumerate(samples):
                copies = np.array(
                    [
                        reference(SIZES, [*samples[:s], np.delete(sample, i), *samples[s + 1 :]], cuts)[0]
                        for i in range(len(sample))
                    ]
                )
                np.testing.assert_allclose(found.copies[at : at + len(sample), rank], copies[:, 0], rtol=1e-6)
                at += len(sample)
                m = len(sample)
                variance += (m - 1) / m * ((copies - copies.mean(axis=0)) ** 2).sum(axis=0)
            statistical = (found.statistical[rank], found.coefficient_statistical[rank])
            assert statistical == pytest.approx(tuple(np.sqrt(variance)), rel=1e-6)


@pytest.mark.parametrize("seed", SEEDS)
def test_known_limits_are_found_within_their_errors(seed):
    generator = np.random.default_rng(seed)
    ranks = np.arange(1.0, RANKS + 1)
    limit = np.log(0.3 * ranks**-0.75)
    coefficient = finite_size_coefficient(0.75) * ranks - 0.5
    trials, pulls, coefficient_pulls, large = 60, [], [], []
    for _ in range(trials):
        data = synthetic(generator, limit, coefficient, 3 * coefficient, replicates=12)
        found = amplitudes_at_infinite_size(SIZES, [with_copies(each) for each in data], 2)
        pulls.append((found.value - limit) / found.total)
        error = np.hypot(found.coefficient_statistical, found.coefficient_systematic)
        coefficient_pulls.append((found.coefficient - coefficient) / error)
        large.append(found.deviation_from(np.exp(limit + 5 * found.total)))
        np.testing.assert_allclose(found.deviation_from(np.exp(limit)), pulls[-1], atol=1e-9)
        np.testing.assert_allclose(large[-1], pulls[-1] - 5, atol=1e-9)
    for values in (np.array(pulls), np.array(coefficient_pulls)):
        by_trial = values.mean(axis=1)  # ranks share noise
        assert abs(by_trial.mean()) < 5 * by_trial.std(ddof=1) / np.sqrt(trials)
        # errors hold: averages over forms are cautious, never too bold
        covered = (np.abs(values) < 1).mean(axis=1)
        assert covered.mean() > 0.683 - 5 * covered.std(ddof=1) / np.sqrt(trials)
        assert covered.mean() < 0.99


@pytest.mark.parametrize("exponent", [1.0, 3 / 4, 2 / 3, 5 / 8, 3 / 5])
def test_the_coefficient_is_the_principal_value_of_the_sum(exponent):
    # (1/i) Σ_j 2 μ_j²/(μ_i² − μ_j²) → ∫ 2 dx/(x^2α − 1), by pairs x and 1/x: one integrand, no pole left
    power = 2 * exponent

    def integrand(x):
        return 2 / (x**power - 1) + 2 / (x**-power - 1) / x**2

    total = quad(integrand, 0, 1 - 1e-6, limit=400)[0]
    assert finite_size_coefficient(exponent) == pytest.approx(total, abs=2e-3)


def test_the_coefficient_has_the_printed_values():
    found = [finite_size_coefficient(exponent) for exponent in (1, 3 / 4, 2 / 3, 5 / 8)]
    np.testing.assert_allclose(found, [0, 2.418, 4.712, 6.918], atol=5e-4)


def test_ranks_that_small_sizes_lack():
    generator = np.random.default_rng(1)
    data = [generator.normal(size=(6, 3)) for _ in SIZES]
    logs = [with_copies(each) for each in data]
    whole = amplitudes_at_infinite_size(SIZES, logs, 1)
    for s in (0, 1, 2):
        logs[s][:, 2] = np.nan
    logs[0][:, 1] = np.nan
    found = amplitudes_at_infinite_size(SIZES, logs, 1)
    assert found.value[0] == whole.value[0]
    assert np.isfinite(found.value[1])
    assert np.isnan([found.value[2], found.statistical[2], found.systematic[2]]).all()
    # sizes that a rank lacks cost as much as sizes left out, and are not left out twice
    shorter = amplitudes_at_infinite_size(SIZES[1:], [each[:, 1:2] for each in logs[1:]], 0)
    assert found.value[1] == pytest.approx(shorter.value[0], rel=1e-9)


def test_too_few_sizes_or_replicates_leave_no_value():
    generator = np.random.default_rng(1)
    logs = [with_copies(generator.normal(size=(6, 2))) for _ in range(2)]
    assert np.isnan(amplitudes_at_infinite_size([10, 20], logs, 2).value).all()
    logs = [with_copies(generator.normal(size=(2, 2))) for _ in SIZES]
    assert np.isnan(amplitudes_at_infinite_size(SIZES, logs, 2).total).all()


def test_what_cannot_be_extrapolated():
    logs = [np.zeros((4, 2))] * 2
    for sizes, arrays in (((20, 10), logs), ((10, 20, 30), logs), ((), ())):
        with pytest.raises(InputError, match=r"^sizes"):
            amplitudes_at_infinite_size(sizes, arrays, 0)
    with pytest.raises(InputError, match=r"^logs"):
        amplitudes_at_infinite_size((10, 20), [np.zeros((4, 2)), np.zeros((4, 3))], 0)


@pytest.mark.slow
def test_small_sprinklings_reach_the_exact_law_of_the_plane():
    # Pauli–Jordan spectrum, Johnston 2010; Afshordi et al. 2012
    logs = []
    for n in SIZES:
        spectra = [
            leading_spectrum(
                OPERATORS["causal"].product(
                    minkowski_diamond(n, np.random.default_rng([n, seed]), dimension=2), 1
                ),
                "antisymmetric",
                RANKS,
                tolerance=1e-6,
            ).eigenvalues
            for seed in range(12)
        ]
        logs.append(with_copies(np.log(np.sort(spectra, axis=1)[:, ::-1][:, :RANKS] / n)))
    found = amplitudes_at_infinite_size(SIZES, logs, 2)
    law = expected_amplitude("causal", "antisymmetric", "diamond", 2)
    assert (np.abs(found.deviation_from(law.magnitudes(RANKS))) < 4).all()
    assert (found.total < 0.05).all()  # the comparison is one to a few per cent
