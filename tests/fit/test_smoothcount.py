"""Smooth counts against the plain sum and a root finder, and against what theory says of power laws."""

from math import exp, factorial, log

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.integrate import quad
from scipy.optimize import brentq
from scipy.special import zeta

from conetone.fit.leastsquares import weighted_least_squares
from conetone.fit.models import MODELS
from conetone.fit.smoothcount import REACH, SmoothRanks, log_cutoffs, ranks_of_windows, smooth_share
from conetone.fit.windows import Window, bins_of_windows

EXPONENTS = (0.62, 0.75, 0.9, 1.0, 1.2)


def power_law(count, exponent):
    return np.arange(1.0, count + 1) ** -exponent


def plain_count(spectrum, cutoff):
    """Σ exp(−(Λ/λ)²)."""
    return sum(exp(-((cutoff / value) ** 2)) for value in spectrum)


def plain_log_cutoff(spectrum, rank):
    """log Λ by a root finder on the plain sum."""
    return brentq(
        lambda t: plain_count(spectrum, exp(t)) + 1 / 2 - rank,
        log(spectrum[-1]) - 2,
        log(spectrum[0]) + 1.5,
        xtol=1e-11,
    )


def random_spectrum(generator):
    """Falling, of any exponent and scale, with or without multiplets."""
    count = int(generator.integers(20, 90))
    logs = generator.normal() - generator.uniform(0.3, 2) * np.log(np.arange(1, count + 1))
    logs = logs + generator.uniform(0, 0.3) * generator.normal(size=count)
    if generator.random() < 0.5:
        logs = np.repeat(logs, generator.integers(1, 9, count))[:count]
    return np.exp(np.sort(logs)[::-1])


def test_cutoffs_are_those_of_the_plain_sum():
    found = 0
    for seed in range(300):
        generator = np.random.default_rng(seed)
        spectrum = random_spectrum(generator)
        ranks = np.sort(generator.uniform(1, len(spectrum) / 3, 3))
        cutoffs = log_cutoffs(spectrum, ranks, complete=True)
        for rank, cutoff in zip(ranks, cutoffs, strict=True):
            if np.isfinite(cutoff):
                assert cutoff == pytest.approx(plain_log_cutoff(spectrum, rank), abs=3e-6)
                found += 1
            else:  # then the count falls short even at the smallest eigenvalue
                assert plain_count(spectrum, spectrum[-1]) + 1 / 2 < rank
    assert found > 850


@pytest.mark.parametrize("degeneracy", [4, 7, 40])
def test_of_one_multiplet_the_count_is_known(degeneracy):
    # m exp(−(Λ/λ)²) + 1/2 = ρ
    spectrum = np.full(degeneracy, 3.0)
    ranks = np.array([1.0, 1.5, 2.5, 9, 15])
    ranks = ranks[ranks < degeneracy / np.e + 0.5]
    expected = np.log(3) + np.log(-np.log((ranks - 0.5) / degeneracy)) / 2
    np.testing.assert_allclose(log_cutoffs(spectrum, ranks, complete=True), expected, atol=3e-5)


@pytest.mark.parametrize("exponent", EXPONENTS)
def test_the_share_is_the_integral_of_the_weight(exponent):
    found, _ = quad(lambda u: exp(-(u ** (2 * exponent))), 0, np.inf)
    assert smooth_share(exponent) == pytest.approx(found, rel=1e-9)


@pytest.mark.parametrize("exponent", EXPONENTS)
def test_of_a_power_law_the_count_is_a_power_and_a_vanishing_series(exponent):
    # Euler–Maclaurin with the powers r^2αk of the weight at r = 0: Σ_k (−1)^k/k! ζ(−2αk) (Λ/A)^2k
    spectrum = 5 * power_law(3000, exponent)
    for cutoff in (1.0, 0.5, 0.2):
        leading = smooth_share(exponent) * (5 / cutoff) ** (1 / exponent)
        series = sum(
            (-1) ** k / factorial(k) * zeta(-2 * exponent * k) * (cutoff / 5) ** (2 * k) for k in range(3)
        )
        assert plain_count(spectrum, cutoff) == pytest.approx(leading + series, abs=2 * (cutoff / 5) ** 6)


@pytest.mark.parametrize("exponent", EXPONENTS)
def test_of_a_power_law_smooth_ranks_fall_with_its_exponent(exponent):
    ranks = np.array([2.0, 4, 8, 16, 32, 64, 128])
    found = log_cutoffs(5 * power_law(2000, exponent), ranks, complete=True)
    pure = log(5) + exponent * np.log(smooth_share(exponent) / ranks)
    # what is left is −α ζ(−2α) (Λ/A)²/ρ: of relative order ρ^(−1 − 2α) in the rank
    correction = exponent * zeta(-2 * exponent) * (smooth_share(exponent) / ranks) ** (2 * exponent) / ranks
    assert (np.abs(found - pure) < 1.1 * np.abs(correction) + 1e-7).all()
    assert np.abs(found - pure)[ranks >= 8].max() < 3e-4
    np.testing.assert_allclose(found[2:], (pure - correction)[2:], atol=1e-5)


@pytest.mark.parametrize("exponent", EXPONENTS)
def test_a_truncated_power_law_is_completed_as_far_as_is_promised(exponent):
    for known in (40, 100, 331):
        ranks = np.geomspace(2, known / REACH, 7)
        ranks[-1] *= 1 - 1e-12
        found = log_cutoffs(power_law(known, exponent), ranks, complete=False)
        full = log_cutoffs(power_law(20 * known, exponent), ranks, complete=True)
        assert np.isfinite(found).all()
        np.testing.assert_allclose(found, full, atol=1e-6)


@pytest.mark.parametrize("seed", [1, 2, 3])
@pytest.mark.parametrize("exponent", [0.7, 0.85, 1.0, 1.2])
def test_a_completion_that_is_not_exact_changes_little(exponent, seed):
    # with a top correction, a knee and noise the missing values are not those of the power law
    known, size = 200, 4000
    ranks = np.arange(1, size)
    noise = 0.05 * np.random.default_rng(seed).normal(size=size - 1)
    logs = -exponent * np.log(ranks) + 0.4 / ranks + 2 * ranks / size + noise
    spectrum = np.exp(np.sort(logs)[::-1])
    at = known / REACH * np.array([0.25, 0.5, 0.75, 0.9])
    found = log_cutoffs(spectrum[:known], at, complete=False)
    apart = np.abs(found - log_cutoffs(spectrum, at, complete=True))
    assert apart[0] < 1e-4
    assert apart[-1] < 0.01


def test_the_less_is_known_the_less_is_reached():
    spectrum = power_law(300, 0.8)
    ranks = np.geomspace(1, 299, 200)
    reached = [
        np.isfinite(log_cutoffs(spectrum[:known], ranks, complete=complete)).sum()
        for known, complete in ((100, False), (100, True), (200, False), (200, True), (300, True))
    ]
    assert reached == sorted(reached)
    assert reached[0] < reached[-1] < 200
    for known in (100, 200):
        found = np.isfinite(log_cutoffs(spectrum[:known], ranks, complete=False))
        assert (np.diff(found.astype(int)) <= 0).all()  # out of reach from some rank on


@pytest.mark.parametrize("complete", [True, False])
@pytest.mark.parametrize("known", [1, 2, 3, 5])
def test_a_spectrum_that_is_too_short_reaches_nothing(known, complete):
    found = log_cutoffs(power_law(known, 0.8), np.array([4.0, 8.0]), complete=complete)
    assert np.isnan(found).all()


def test_cutoffs_scale_with_the_spectrum_and_fall_with_rank():
    for seed in range(50):
        generator = np.random.default_rng(seed)
        spectrum = random_spectrum(generator)
        ranks = np.sort(generator.uniform(1, len(spectrum) / 5, 6))
        for complete in (True, False):
            found = log_cutoffs(spectrum, ranks, complete=complete)
            scaled = log_cutoffs(1e5 * spectrum, ranks, complete=complete)
            np.testing.assert_allclose(scaled, found + log(1e5), atol=1e-9)
            finite = found[np.isfinite(found)]
            assert (np.diff(finite) < 0).all()


def scatter_about_a_power_law(axis, logs):
    design = MODELS["power"].design(axis, 1.0)
    fit = weighted_least_squares(design, logs, np.ones(axis.count))
    return np.sqrt(fit.chi2 / (axis.count - 2)), fit.parameters[1]


@pytest.mark.parametrize("exponent", [0.6, 0.8, 1.0])
def test_steps_by_multiplets_are_damped(exponent):
    # (l + 1)² equal values at their middle rank, as of a sphere: a power law in steps
    multiplets = np.arange(1, 26) ** 2
    middle = np.cumsum(multiplets) - (multiplets - 1) / 2
    spectrum = np.repeat(middle**-exponent, multiplets)
    window = Window(10, 700)
    bins = bins_of_windows([window], 12)
    steps, _ = scatter_about_a_power_law(bins, bins.average(np.log(spectrum[: bins.last])))
    ranks = ranks_of_windows([window], 12)
    left, found = scatter_about_a_power_law(ranks, log_cutoffs(spectrum, ranks.ranks, complete=True))
    assert steps > 0.05
    assert left < steps / 15
    assert found == pytest.approx(exponent, abs=0.01)


ends = st.floats(1, 500)
windows = st.tuples(ends, ends).filter(lambda pair: pair[0] < pair[1] * 0.999).map(lambda p: Window(*p))


@settings(max_examples=200, deadline=None)
@given(st.lists(windows, min_size=1, max_size=5), st.integers(2, 30))
def test_every_window_begins_and_ends_at_a_smooth_rank(chosen, points):
    axis = ranks_of_windows(chosen, points)
    assert (np.diff(axis.ranks) > 0).all()
    assert axis.ranks.shape == (axis.count,)
    for window in chosen:
        inside = axis.ranks[axis.inside(window)]
        assert inside[0] == pytest.approx(window.first, rel=1e-8)
        assert inside[-1] == pytest.approx(window.last, rel=1e-8)
        np.testing.assert_array_equal(
            inside,
            [r for r in axis.at if window.first * (1 - 1e-9) <= r <= window.last * (1 + 1e-9)],
        )


@pytest.mark.parametrize("points", [2, 5, 12])
def test_of_one_window_they_are_even_in_log_rank(points):
    axis = ranks_of_windows([Window(3, 81)], points)
    np.testing.assert_allclose(axis.ranks, 3 * 27 ** (np.arange(points) / (points - 1)), rtol=1e-12)
    np.testing.assert_array_equal(axis.of(np.log), np.log(axis.ranks))
    assert axis.inside(Window(100, 200)) == slice(0, 0)


@pytest.mark.parametrize("at", [(), (0.5, 2.0), (1.0, 1.0), (3.0, 2.0)])
def test_ranks_that_do_not_rise_from_one_on_are_refused(at):
    with pytest.raises(ValueError, match="rise from 1 on"):
        SmoothRanks(at)
