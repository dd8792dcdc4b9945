"""One series: what its parts make of it, why it has no exponent, and how far two estimators are apart."""

from dataclasses import replace
from math import sqrt

import numpy as np
import pytest

from conetone.aggregate.resample import Candidate, Measured, measure, stack_copies
from conetone.aggregate.scaling import average_at_sizes, extrapolate
from conetone.aggregate.series import (
    HIDDEN_LOGARITHM,
    candidates_of,
    deviation_between,
    series_exponent,
)
from conetone.fit.models import MODELS
from conetone.fit.powerlaw import Estimates
from conetone.fit.size import ESTIMATORS, SizeSpectra, WindowSettings, fit_size
from conetone.fit.windows import Growth, WindowRule

SIZES = (100, 200, 400, 800)
REPLICATES = (4, 3, 5, 3)
OMEGAS = (0.5, 1.0)


def estimates(generator, size, replicates, error=0.01):
    exponent = 0.75 + 2 * size**-0.6 + error * generator.normal(size=1 + replicates)
    return Estimates(
        exponent,
        np.full(1 + replicates, error),
        np.full(1 + replicates, error / 2),
        generator.chisquare(4, 1 + replicates),
    )


def candidate(generator, missing=(), parameters=2, log_rank=np.inf):
    return Candidate(
        parameters,
        [
            None if size in missing else estimates(generator, size, m)
            for size, m in zip(SIZES, REPLICATES, strict=True)
        ],
        [1, 0, 2, 1],
        log_rank,
    )


@pytest.mark.parametrize("cut", [0, 2])
def test_a_series_is_what_its_parts_make_of_it(cut):
    generator = np.random.default_rng(cut)
    candidates = [candidate(generator), candidate(generator, missing=(100,), parameters=3)]
    found = series_exponent(SIZES, REPLICATES, candidates, OMEGAS, cut)
    stacked = stack_copies(SIZES, REPLICATES, candidates)
    plain = extrapolate(stacked, OMEGAS, cut)
    assert found.reason is None
    assert (found.sizes, found.replicates, found.fitted_sizes) == (SIZES, REPLICATES, SIZES)
    for name in ("value", "statistical", "systematic", "copies"):
        expected = getattr(measure(plain.limit, REPLICATES), name)
        np.testing.assert_array_equal(getattr(found.limit, name), expected)
        expected = getattr(measure(plain.at_sizes, REPLICATES), name)
        np.testing.assert_array_equal(getattr(found.at_sizes, name), expected)
    curve = found.curve(np.array([300.0, np.inf]))
    assert curve.value[1] == found.limit.value[0]
    assert curve.systematic[1] == found.limit.systematic[0]
    assert curve.value[0] == plain.at(np.array([300.0])).value[0, 0]


def test_a_hidden_logarithm_is_weighed_over_candidates_and_widens_the_systematic_error():
    generator = np.random.default_rng(1)
    candidates = [candidate(generator, log_rank=2.0), candidate(generator, log_rank=4.0)]
    found = series_exponent(SIZES, REPLICATES, candidates, OMEGAS, 1)
    without = series_exponent(
        SIZES, REPLICATES, [replace(each, log_rank=np.inf) for each in candidates], OMEGAS, 1
    )
    hidden = HIDDEN_LOGARITHM * sum(w / log for w, log in zip(found.found.weights, (2, 4), strict=True))
    assert found.hidden == pytest.approx(hidden)
    assert without.hidden == 0
    assert HIDDEN_LOGARITHM / 4 < hidden < HIDDEN_LOGARITHM / 2
    sizes = np.array([300.0, 1e4, np.inf])
    wide, narrow = found.curve(sizes), without.curve(sizes)
    np.testing.assert_allclose(wide.systematic, np.hypot(narrow.systematic, hidden))
    np.testing.assert_array_equal(wide.value, narrow.value)
    np.testing.assert_array_equal(wide.statistical, narrow.statistical)
    assert found.limit.systematic[0] == pytest.approx(np.hypot(without.limit.systematic[0], hidden))


def test_too_few_sizes_have_averages_but_no_limit():
    generator = np.random.default_rng(2)
    candidates = [candidate(generator, missing=(100, 200))]
    found = series_exponent(SIZES, REPLICATES, candidates, OMEGAS, 2)
    assert (found.found, found.limit, found.hidden) == (None, None, 0)
    assert found.reason == "2 usable sizes; extrapolation takes 3"
    assert found.fitted_sizes == (400, 800)
    averages = average_at_sizes(stack_copies(SIZES, REPLICATES, candidates))
    expected = measure(averages, REPLICATES)
    np.testing.assert_array_equal(found.at_sizes.value, expected.value)
    np.testing.assert_array_equal(np.isnan(found.at_sizes.value), [True, True, False, False])
    with pytest.raises(ValueError, match="2 usable sizes"):
        found.curve(np.array([np.inf]))


def test_without_the_largest_size_no_window_counts():
    generator = np.random.default_rng(3)
    # three sizes each, but not the largest: that one has but a candidate of its own
    candidates = [candidate(generator, missing=(800,)), candidate(generator, missing=(100, 200))]
    found = series_exponent(SIZES, REPLICATES, candidates, OMEGAS, 2)
    assert found.reason == "no window has fits at 3 sizes, the largest among them"
    assert found.fitted_sizes == SIZES
    assert found.limit is None


def spectra(generator, size, replicates=5):
    ranks = np.arange(1, size // 2)
    logs = -0.8 * np.log(ranks) + 0.05 * generator.normal(size=(replicates, len(ranks)))
    return SizeSpectra(size, list(np.exp(-np.sort(-logs, axis=1))), complete=True)


@pytest.mark.parametrize("estimator", ESTIMATORS)
def test_candidates_are_every_window_and_model_by_size(estimator):
    generator = np.random.default_rng(4)
    rules = tuple(
        WindowRule(Growth.parse("0.25 * n^0.5"), Growth.parse(f"{last} * n^0.75")) for last in (0.3, 0.6)
    )
    settings = WindowSettings(rules, 2, 8, ("power", "top-and-knee"))
    fits = [fit_size(spectra(generator, size), settings, estimator) for size in (40, 120, 360)]
    found = candidates_of(fits, settings)
    assert len(found) == 4
    for each, (rule, model) in zip(found, settings.candidates, strict=True):
        assert each.parameters == MODELS[model].parameters
        # the middle in log rank of the window at the largest size
        window = rule.at(360, 2)
        assert np.exp(each.log_rank) == pytest.approx(sqrt(window.first * window.last))
        for size, estimated, cut in zip(fits, each.estimates, each.bins_cut, strict=True):
            fit = size.fits[rule, model]
            assert estimated is (fit.estimates if fit else None)
            assert cut == (fit.bins_cut if fit else 0)
    assert any(each is None for one in found for each in one.estimates)
    assert any(cut > 0 for one in found for cut in one.bins_cut)


def plain_deviation(quoted, other, replicates):
    variance, first = 0.0, 0
    for count in replicates:
        if count > 1:
            apart = [other.copies[i, 0] - quoted.copies[i, 0] for i in range(first, first + count)]
            mean = sum(apart) / count
            variance += (count - 1) / count * sum((each - mean) ** 2 for each in apart)
        first += count
    total = sqrt(variance + quoted.systematic[0] ** 2 + other.systematic[0] ** 2)
    return (other.value[0] - quoted.value[0]) / total


def measured(value, copies, systematic=0.0):
    # their own statistical errors do not enter
    return Measured(np.array([value]), np.array([np.nan]), np.array([systematic]), copies[:, np.newaxis])


@pytest.mark.parametrize("replicates", [(4, 3, 5), (2, 2), (6,), (1, 4)])
def test_the_deviation_against_loops(replicates):
    for seed in range(60):
        generator = np.random.default_rng(seed)
        one, other = (
            measured(0.7 + 0.1 * generator.normal(), generator.normal(size=sum(replicates)), systematic)
            for systematic in generator.uniform(0, 0.5, 2)
        )
        expected = plain_deviation(one, other, replicates)
        assert deviation_between(one, other, replicates) == pytest.approx(expected, rel=1e-10)
        assert deviation_between(other, one, replicates) == pytest.approx(-expected, rel=1e-10)


def test_equal_copies_leave_systematic_errors_alone():
    copies = np.random.default_rng(1).normal(size=7)
    one, other = measured(0.7, copies, 0.03), measured(0.75, copies + 0.05, 0.04)
    assert deviation_between(one, other, (4, 3)) == pytest.approx(1)
    assert deviation_between(one, one, (4, 3)) == 0


def test_what_has_no_error_does_not_deviate():
    copies = np.zeros(5)
    assert deviation_between(measured(0.7, copies), measured(0.7, copies), (5,)) == 0


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_deviations_of_repeated_samples_are_of_order_one(seed):
    # two estimators of one number from the same replicates, most of whose noise is common
    generator = np.random.default_rng(seed)
    found, naive = [], []
    replicates = (12, 20)
    for _ in range(600):
        noise = [generator.normal(size=(3, m)) * [[0.5], [0.1], [0.1]] for m in replicates]
        rows = [[parts[0] + parts[k] for parts in noise] for k in (1, 2)]
        pair = []
        for samples in rows:
            means = [row.mean() for row in samples]
            copies = [
                sum(means) - means[s] + np.delete(row, i).mean()
                for s, row in enumerate(samples)
                for i in range(len(row))
            ]
            pair.append(measured(sum(means), np.array(copies)))
        found.append(deviation_between(*pair, replicates))
        alone = sum(sum(row.var(ddof=1) / len(row) for row in samples) for samples in rows)
        naive.append((pair[1].value[0] - pair[0].value[0]) / sqrt(alone))
    # a ratio to an error from 12 and 20 values has the spread of Student's t of about 25 degrees
    assert abs(np.mean(found)) < 5 / sqrt(600)
    assert abs(np.std(found) - sqrt(25 / 23)) < 5 / sqrt(2 * 600)
    assert np.std(naive) < 0.4
