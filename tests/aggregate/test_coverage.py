"""Injection: noise with the measured covariance, truths with the stated exponent, coverage of known pulls."""

from collections import Counter
from dataclasses import replace

import numpy as np
import pytest
from scipy.special import lambertw
from scipy.stats import kstest, norm

from conetone.aggregate.coverage import (
    ONE_SIGMA,
    TWO_SIGMA,
    Coverage,
    Ground,
    Injection,
    Noise,
    Pipeline,
    Proportion,
    inject,
    run_injection,
)
from conetone.aggregate.promise import verdict
from conetone.aggregate.truths import (
    LOGARITHM_TRUTHS,
    POWER_TRUTHS,
    Circumstances,
    departure_from_trend,
    multiplet_levels,
)
from conetone.fit.models import KAPPA, POWER_MODELS
from conetone.fit.size import ESTIMATORS, SizeSpectra, WindowSettings
from conetone.fit.windows import Growth, WindowRule

SEEDS = (1, 2, 3)
# Truths that have no curve in closed form.
STEPS = ("multiplets-4", "multiplets-5", "measured-steps")
SIZES = (64, 90, 128, 181)
REPLICATES = 8


def pipeline() -> Pipeline:
    rules = tuple(
        WindowRule(Growth.parse(f"{low} * n^0.5"), Growth.parse("0.35 * n^0.75")) for low in (0.25, 0.4)
    )
    windows = WindowSettings(rules, smallest_rank=2, bins=8, models=POWER_MODELS)
    return Pipeline(windows, omegas=(0.5, 1.0), most_sizes_cut=1)


def measured(generator: np.random.Generator, exponent: float = 0.8) -> list[SizeSpectra]:
    """Power laws whose replicates differ in scale, slope and rank by rank."""
    spectra = []
    for size in SIZES:
        ranks = np.arange(1, size // 2 + 1)
        logs = -exponent * np.log(ranks) + generator.normal(0, 0.05, (REPLICATES, 1))
        logs = logs + generator.normal(0, 0.01, (REPLICATES, 1)) * np.log(ranks)
        logs = logs + generator.normal(0, 0.02, (REPLICATES, len(ranks)))
        spectra.append(SizeSpectra(size, list(np.exp(-np.sort(-logs, axis=1))), complete=True))
    return spectra


@pytest.mark.parametrize("seed", SEEDS)
def test_noise_has_the_measured_covariance(seed: int) -> None:
    generator = np.random.default_rng(seed)
    noise = Noise.of(measured(generator)[0])
    covariance = np.cov(noise.departures, rowvar=False)
    draws = np.concatenate([noise.draw(generator) for _ in range(600)])
    found = draws.T @ draws / len(draws)
    variance = np.outer(covariance.diagonal(), covariance.diagonal()) + covariance**2
    assert np.abs((found - covariance) / np.sqrt(variance / len(draws))).max() < 5


def test_noise_holds_ranks_that_all_replicates_have() -> None:
    noise = Noise.of(SizeSpectra(9, [np.array([4.0, 2.0, 1.0]), np.array([4.0, 8 / 2])], complete=True))
    assert noise.ranks.tolist() == [1, 2]
    assert noise.departures == pytest.approx(np.array([[0, -1], [0, 1]]) * np.log(2) / 2)
    with pytest.raises(ValueError, match="no covariance"):
        Noise.of(SizeSpectra(9, [np.array([1.0])], complete=True))


def local_exponent(curve, rank: float, size: float) -> float:
    """−d log λ/d log r by a central difference."""
    low, high = (curve(np.array([rank * factor]), size)[0] for factor in (0.99, 1.01))
    return float((low - high) / np.log(1.01 / 0.99))


@pytest.mark.parametrize("seed", SEEDS)
@pytest.mark.parametrize("logarithm", [False, True])
def test_truths_have_the_stated_exponent_far_out(logarithm: bool, seed: int) -> None:
    given = Circumstances(SIZES, reach=0.1, steps={}, logarithm=logarithm)
    for name, truth in (LOGARITHM_TRUTHS if logarithm else POWER_TRUTHS).items():
        if name in STEPS:
            continue
        for exponent in (0.4, 0.7, 1.1):
            curve = truth.draw(np.random.default_rng(seed), exponent, given)
            left = []
            for rank, size in ((1e3, 1e6), (1e6, 1e12)):
                leading = exponent
                if logarithm:
                    # d log W(r e^κ)/d log r = 1/(1 + W)
                    leading -= 1 / (1 + lambertw(rank * np.exp(KAPPA)).real)
                left.append(abs(local_exponent(curve, rank, size) - leading))
            # two corrections may cancel near by
            assert left[1] < max(0.6 * left[0], 0.002), name
            assert left[1] < 0.02, name


def test_a_knee_flattens_the_spectrum_but_never_turns_it() -> None:
    given = Circumstances(SIZES, reach=0.5, steps={}, logarithm=False)
    ranks = np.arange(1.0, 182)
    for seed in range(100):
        for name in ("knee", "knee-moved"):
            logs = POWER_TRUTHS[name].draw(np.random.default_rng(seed), 0.7, given)(ranks, 181)
            slopes = -np.diff(logs) / np.diff(np.log(ranks))
            assert slopes.min() > 0.25 * 0.7 * (1 - 1e-9), name


@pytest.mark.parametrize("dimension", [4, 5])
def test_multiplets_are_the_levels_of_a_separable_problem(dimension: int) -> None:
    spacing, count = 1.37, 60
    offset = (1 + spacing) / 2 if dimension == 4 else 1 + spacing / 2
    plain = sorted(
        angular + spacing * radial + offset
        for angular in range(12)
        for radial in range(12)
        for _ in range(2 * angular + 1 if dimension == 4 else (angular + 1) ** 2)
    )[:count]
    found = multiplet_levels(count, dimension, spacing)
    assert found == pytest.approx(plain)
    sizes = list(Counter(np.round(found, 9)).values())
    assert sizes[:2] == [1, 3 if dimension == 4 else 4]


@pytest.mark.parametrize("spacing", [1.0, 1.5, 2.0])
@pytest.mark.parametrize("dimension", [4, 5])
def test_multiplets_have_the_stated_exponent_and_no_term_of_the_surface(
    dimension: int, spacing: float
) -> None:
    levels = multiplet_levels(40_000, dimension, spacing)
    volume = {4: 3 * spacing, 5: 12 * spacing}[dimension]
    # middle ranks, so that a multiplet counts half where it stands
    ranks = np.arange(1, len(levels) + 1) - 0.5
    ratio = np.log(ranks * volume / levels ** (dimension - 1))
    for low, high in ((300, 3_000), (4_000, 40_000)):
        mean = ratio[low:high].mean()
        # relative order 1/x would be 0.5 to 1 times this
        assert abs(mean) < 0.25 / levels[low]


def test_departure_from_trend_against_a_plain_fit() -> None:
    generator = np.random.default_rng(4)
    for count in (2, 3, 10, 57):
        logs = -0.7 * np.log(np.arange(1, count + 1)) + generator.normal(0, 0.1, count)
        plain = []
        for rank in range(1, count + 1):
            near = [r for r in range(1, count + 1) if rank / np.e <= r <= rank * np.e]
            fit = np.polyfit(np.log(near), logs[np.array(near) - 1], 1, w=1 / np.sqrt(near))
            plain.append(logs[rank - 1] - np.polyval(fit, np.log(rank)))
        assert departure_from_trend(logs) == pytest.approx(plain, abs=1e-9)
    assert departure_from_trend(3 - 0.6 * np.log(np.arange(1, 300))) == pytest.approx(0, abs=1e-9)


def pulls(generator: np.random.Generator, count: int, error: float) -> Coverage:
    """Values with normal errors of 0.01 and a total error that says so, or something else."""
    truth = generator.uniform(0.5, 1, count)
    value = truth + generator.normal(0, 0.01, count)
    return Coverage(value, np.full(count, error), truth)


@pytest.mark.parametrize("seed", SEEDS)
def test_coverage_of_normal_pulls(seed: int) -> None:
    count = 4000
    coverage = pulls(np.random.default_rng(seed), count, 0.01)
    for sigmas, nominal in ((1, ONE_SIGMA), (2, TWO_SIGMA)):
        assert abs(coverage.within(sigmas).value - nominal) < 5 * np.sqrt(nominal * (1 - nominal) / count)
    assert abs(coverage.bias) < 5 / np.sqrt(count)
    assert abs(coverage.spread - 1) < 5 / np.sqrt(2 * count)
    assert kstest(coverage.pit, "uniform").pvalue > 1e-6
    # of a quantile: √(p(1 − p)/count)/density, where |normal| has 2 φ(1)
    assert abs(coverage.excess - 1) < 5 * np.sqrt(ONE_SIGMA * (1 - ONE_SIGMA) / count) / (2 * norm.pdf(1))
    assert coverage.width == pytest.approx(0.01)


def test_wide_errors_show_in_the_excess_and_a_shift_in_bias_and_pit() -> None:
    right = pulls(np.random.default_rng(5), 1000, 0.01)
    assert replace(right, total=3 * right.total).excess == pytest.approx(3 * right.excess)
    low = replace(right, value=right.value - 0.02)
    assert low.bias == pytest.approx(right.bias - 2)
    assert low.pit.mean() > 0.8  # truth above the values found


def test_a_wrong_value_without_an_error_is_never_covered() -> None:
    coverage = Coverage(np.array([1.0, 2.0]), np.zeros(2), np.array([1.0, 1.5]))
    assert coverage.within(2).value == 0.5


@pytest.mark.parametrize("inside", [True, False])
def test_a_frozen_error_half_as_large_breaks_the_promise(inside: bool) -> None:
    for seed in SEEDS:
        verdicts = [
            verdict(pulls(np.random.default_rng(seed), 400, error), inside=inside)
            for error in (0.005, 0.01, 0.03)
        ]
        assert verdicts == ["too narrow", "kept", "wasteful" if inside else "kept"]


@pytest.mark.parametrize("sigmas", [1.0, 2.0])
def test_wilson_interval_ends_where_the_share_is_so_many_errors_away(sigmas: float) -> None:
    for hits, count in ((0, 10), (7, 10), (290, 400), (400, 400)):
        found = Proportion.of(hits, count, sigmas)
        for end in (found.low, found.high):
            if 1e-9 < end < 1 - 1e-9:
                distance = abs(hits / count - end) / np.sqrt(end * (1 - end) / count)
                assert distance == pytest.approx(sigmas)
    with pytest.raises(ValueError, match="nothing"):
        Proportion.of(0, 0)


def test_injections_take_sizes_and_replicates_from_the_series_and_repeat() -> None:
    ground = Ground.of(measured(np.random.default_rng(6)), pipeline())
    assert abs(ground.exponent - 0.8) < 0.1
    results = []
    for _ in range(2):
        generator = np.random.default_rng(7)
        drawn = Injection.draw(POWER_TRUTHS["top"], ground, generator)
        spectra = inject(drawn, ground, generator)
        assert [(each.size, len(each.magnitudes)) for each in spectra] == [(n, REPLICATES) for n in SIZES]
        assert all((np.diff(each) <= 0).all() for size in spectra for each in size.magnitudes)
        results.append(run_injection(POWER_TRUTHS["top"], ground, np.random.default_rng(7), ESTIMATORS))
        assert results[-1][0].exponent == drawn.exponent
        assert abs(drawn.exponent - ground.exponent) <= 0.1
    assert results[0][1] == results[1][1]


def test_both_estimators_find_injected_power_laws() -> None:
    ground = Ground.of(measured(np.random.default_rng(8)), pipeline())
    for seed in SEEDS:
        drawn, found = run_injection(POWER_TRUTHS["power"], ground, np.random.default_rng(seed), ESTIMATORS)
        for name, recovered in found.items():
            assert recovered.reason is None
            assert abs(recovered.value - drawn.exponent) < 5 * recovered.total, name
            assert recovered.total < 0.3, name


def test_a_series_without_an_exponent_says_why() -> None:
    spectra = measured(np.random.default_rng(9))
    with pytest.raises(ValueError, match="no exponent: 2 usable sizes"):
        Ground.of(spectra[:2], pipeline())
    single = [replace(each, magnitudes=each.magnitudes[:1]) for each in spectra]
    with pytest.raises(ValueError, match="no size has a fit"):
        Ground.of(single, pipeline())


@pytest.mark.slow
@pytest.mark.parametrize("name", ["power", "top", "drift", "measured-steps"])
def test_errors_keep_their_promise_in_400_injections(name: str) -> None:
    ground = Ground.of(measured(np.random.default_rng(10)), pipeline())
    truth = POWER_TRUTHS[name]
    estimator = ground.pipeline.windows.estimator
    drawn, found = zip(
        *(run_injection(truth, ground, np.random.default_rng([11, i]), [estimator]) for i in range(400)),
        strict=True,
    )
    results = [each[estimator] for each in found]
    coverage = Coverage(
        np.array([each.value for each in results]),
        np.array([each.total for each in results]),
        np.array([each.exponent for each in drawn]),
    )
    assert verdict(coverage, inside=truth.inside) != "too narrow", coverage.within(1)
