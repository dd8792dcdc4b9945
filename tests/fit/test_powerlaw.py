"""Fits of power laws against a slow, plain implementation, and exactly where the answer is known."""

from math import sqrt
from statistics import fmean, stdev

import numpy as np
import pytest
from scipy.optimize import brentq

from conetone.fit.models import MODELS
from conetone.fit.powerlaw import SMALLEST_ERROR, SPARE_BINS, DataVector, fit_power_law
from conetone.fit.ranking import BinnedLogs
from conetone.fit.resample import jackknife_variance
from conetone.fit.windows import RankBins, Window

BINS = RankBins((2, 3, 4, 5, 7, 9, 12, 16, 21, 28, 37, 50))
WINDOWS = [Window(2, 50), Window(3, 28), Window(5, 50)]


def synthetic(seed, replicates, steps, bins=BINS, exponent=0.8, correction=0.3):
    """Binned logs: a power law with a top correction, steps in rank, and noise correlated along the ranks."""
    generator = np.random.default_rng(seed)
    ranks = np.arange(1, bins.last + 1)
    curve = 1 - exponent * np.log(ranks) + correction / ranks + steps * np.sin(9 * np.log(ranks))
    noise = 0.05 * generator.normal(size=(replicates, 1)) + 0.02 * generator.normal(
        size=(replicates, 1)
    ) * np.log(ranks)
    noise = noise + 0.03 * generator.normal(size=(replicates, len(ranks)))
    return bins.average(curve + noise)


def plain_design(model, bins):
    terms = [lambda r: 1.0, lambda r: -np.log(r), lambda r: 1 / r][: 2 if model == "power" else 3]
    ranks = [range(low, high) for low, high in zip(bins.edges[:-1], bins.edges[1:], strict=True)]
    return np.array([[fmean(term(r) for r in bin_) for term in terms] for bin_ in ranks])


def plain_linear_fit(design, values, errors):
    """Parameters, gain and χ² from the normal equations."""
    weights = np.diag(np.array(errors) ** -2.0)
    gain = np.linalg.solve(design.T @ weights @ design, design.T @ weights)
    parameters = gain @ values
    return parameters, gain, sum(((values - design @ parameters) / errors) ** 2)


def plain_scatter(design, means, errors):
    """τ by a root finder on χ²(τ²) − ν (Paule & Mandel 1982)."""
    degrees = len(design) - 2

    def excess(variance):
        return plain_linear_fit(design, means, np.sqrt(errors**2 + variance))[2] - degrees

    if excess(0.0) <= 0:
        return 0.0
    largest = 1.0
    while excess(largest) > 0:
        largest *= 2
    return sqrt(brentq(excess, 0, largest, xtol=1e-16, rtol=1e-14))


def plain_fit(values, bins, model, window, errors=None):
    """Exponent, statistical error, misfit and χ² of one set of replicates, nothing stacked or shared."""
    means = np.array([fmean(column) for column in values.T])
    if errors is None:
        errors = np.array([stdev(column) / sqrt(len(values)) for column in values.T])
    errors = np.maximum(errors, SMALLEST_ERROR)
    tau = plain_scatter(plain_design("power", bins), means, errors)
    inside = [
        b for b in range(bins.count) if window.first <= bins.edges[b] and bins.edges[b + 1] <= window.last
    ]
    design, data, total = plain_design(model, bins)[inside], means[inside], np.hypot(errors[inside], tau)
    if model == "top-correction":  # the prior 0 ± 1 of its third parameter, as one more measurement
        design, data, total = np.vstack([design, [0, 0, 1]]), np.append(data, 0), np.append(total, 1)
    parameters, gain, chi2 = plain_linear_fit(design, data, total)
    functional = gain[1][: len(inside)]
    projected = [functional @ row[inside] for row in values]
    statistical = stdev(projected) / sqrt(len(values)) if len(values) > 1 else None
    return parameters[1], statistical, tau * np.linalg.norm(functional), chi2


@pytest.mark.parametrize("model", MODELS)
@pytest.mark.parametrize("steps", [0.0, 0.01, 0.2])
def test_every_copy_is_a_fit_of_its_replicates_alone(model, steps):
    for seed in range(4):
        replicates = [3, 4, 9, 16][seed]
        values = synthetic(seed, replicates, steps)
        vector = DataVector.of(BinnedLogs(BINS, values.copy()))
        for window in WINDOWS:
            found = fit_power_law(vector, MODELS[model], window).estimates
            subsets = [values, *(np.delete(values, i, axis=0) for i in range(replicates))]
            for copy, subset in enumerate(subsets):
                exponent, statistical, misfit, chi2 = plain_fit(subset, BINS, model, window)
                assert found.exponent[copy] == pytest.approx(exponent, rel=1e-7)
                assert found.statistical[copy] == pytest.approx(statistical, rel=1e-6)
                assert found.misfit[copy] == pytest.approx(misfit, rel=1e-6, abs=1e-12)
                assert found.chi2[copy] == pytest.approx(chi2, rel=1e-6)


@pytest.mark.parametrize("model", MODELS)
def test_of_two_replicates_the_copies_reuse_the_errors_of_both(model):
    values = synthetic(5, 2, 0.05)
    vector = DataVector.of(BinnedLogs(BINS, values.copy()))
    errors = np.array([stdev(column) / sqrt(2) for column in values.T])
    found = fit_power_law(vector, MODELS[model], WINDOWS[0]).estimates
    for copy, subset in enumerate([values, values[1:], values[:1]]):
        exponent, _, misfit, chi2 = plain_fit(subset, BINS, model, WINDOWS[0], errors)
        assert found.exponent[copy] == pytest.approx(exponent, rel=1e-7)
        assert found.misfit[copy] == pytest.approx(misfit, rel=1e-6, abs=1e-12)
        assert found.chi2[copy] == pytest.approx(chi2, rel=1e-6)
    assert found.statistical[0] == pytest.approx(plain_fit(values, BINS, model, WINDOWS[0])[1], rel=1e-7)
    assert (found.statistical[1:] == found.statistical[0]).all()


def test_means_and_errors_of_the_data_vector():
    values = synthetic(6, 7, 0.1)
    vector = DataVector.of(BinnedLogs(BINS, values.copy()))
    for copy in range(8):
        subset = values if copy == 0 else np.delete(values, copy - 1, axis=0)
        np.testing.assert_allclose(vector.means[copy], [fmean(c) for c in subset.T], rtol=1e-12)
        expected = [stdev(c) / sqrt(len(subset)) for c in subset.T]
        np.testing.assert_allclose(vector.errors[copy], expected, rtol=1e-9)


@pytest.mark.parametrize("steps", [0.0, 0.003, 0.03, 0.3, 3.0])
def test_the_scatter_makes_chi_squared_equal_its_degrees_of_freedom(steps):
    design = plain_design("power", BINS)
    for seed in range(5):
        values = synthetic(seed, 12, steps, correction=0)
        vector = DataVector.of(BinnedLogs(BINS, values.copy()))
        for copy in (0, 1, 12):
            expected = plain_scatter(design, vector.means[copy], vector.errors[copy])
            assert vector.scatter[copy] == pytest.approx(expected, rel=1e-6)
            total = np.hypot(vector.errors[copy], vector.scatter[copy])
            chi2 = plain_linear_fit(design, vector.means[copy], total)[2]
            degrees = BINS.count - 2
            assert chi2 == pytest.approx(degrees, rel=1e-5) if expected else chi2 <= degrees


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_the_scatter_is_that_of_the_steps(seed):
    # steps independent from bin to bin, of standard deviation 0.2, on data without other noise to speak of
    generator = np.random.default_rng(seed)
    found = []
    for _ in range(100):
        steps = 0.2 * generator.normal(size=BINS.count)
        values = (
            1e-6 * generator.normal(size=(5, BINS.count)) + steps + plain_design("power", BINS) @ [1, 0.7]
        )
        found.append(DataVector.of(BinnedLogs(BINS, values)).scatter[0] ** 2)
    assert abs(np.mean(found) - 0.04) < 5 * np.std(found, ddof=1) / 10


@pytest.mark.parametrize("window", WINDOWS)
@pytest.mark.parametrize("model", MODELS)
def test_a_noise_free_power_law_is_found_exactly(model, window):
    amplitudes = np.array([0.5, 1, 1.5, 3])
    for exponent in (0.5, 2 / 3, 1.0, 1.7):
        values = np.log(amplitudes)[:, np.newaxis] + plain_design("power", BINS) @ [0, exponent]
        vector = DataVector.of(BinnedLogs(BINS, values))
        np.testing.assert_array_equal(vector.scatter, 0)
        fit = fit_power_law(vector, MODELS[model], window)
        np.testing.assert_allclose(fit.estimates.exponent, exponent, rtol=1e-10)
        # replicates that differ by their amplitude alone agree about the exponent
        assert fit.estimates.statistical.max() < 1e-12
        assert fit.estimates.misfit.max() == 0
        assert fit.estimates.chi2.max() < 1e-18
        assert fit.parameters[0] == pytest.approx(np.log(amplitudes).mean(), rel=1e-9)


def test_identical_replicates_are_no_division_by_zero():
    values = np.tile(plain_design("top-correction", BINS) @ [0.3, 0.9, 0.5], (4, 1))
    vector = DataVector.of(BinnedLogs(BINS, values))
    fit = fit_power_law(vector, MODELS["top-correction"], Window(2, 50))
    assert np.isfinite(fit.estimates.exponent).all()
    assert fit.estimates.statistical.max() < 1e-12
    assert (fit.estimates.misfit > 0).all()  # a power law alone leaves the correction as scatter
    straight = np.tile(plain_design("power", BINS) @ [0.3, 0.9], (4, 1))
    fit = fit_power_law(DataVector.of(BinnedLogs(BINS, straight)), MODELS["power"], Window(2, 50))
    np.testing.assert_allclose(fit.estimates.exponent, 0.9, rtol=1e-9)


@pytest.mark.parametrize("model", MODELS)
def test_the_statistical_error_is_that_of_delete_one_refits(model):
    # brute force: the same weights, every fit done again without one replicate
    for seed in range(5):
        values = synthetic(seed, 11, 0.05)
        vector = DataVector.of(BinnedLogs(BINS, values.copy()))
        design = plain_design(model, BINS)
        total = np.hypot(vector.errors[0], vector.scatter[0])
        prior = ([[0, 0, 1]], [0], [1]) if model == "top-correction" else (np.empty((0, 2)), [], [])
        refits = []
        for i in range(len(values)):
            means = np.array([fmean(column) for column in np.delete(values, i, axis=0).T])
            refits.append(
                plain_linear_fit(
                    np.vstack([design, prior[0]]), np.append(means, prior[1]), np.append(total, prior[2])
                )[0][1]
            )
        found = fit_power_law(vector, MODELS[model], Window(2, 50)).estimates
        assert found.statistical[0] ** 2 == pytest.approx(jackknife_variance(np.array(refits)), rel=1e-7)


def test_what_a_fit_says_of_itself():
    values = synthetic(1, 8, 0.05)
    vector = DataVector.of(BinnedLogs(BINS, values))
    for name, model in MODELS.items():
        for window in WINDOWS:
            fit = fit_power_law(vector, model, window)
            inside = BINS.inside(window)
            bins = inside.stop - inside.start
            assert fit.bins_cut == BINS.count - bins
            # the prior is one more measurement, its parameter one more to find
            assert fit.degrees == bins - 2
            assert np.isnan(np.delete(fit.fitted, range(BINS.count)[inside])).all()
            np.testing.assert_allclose(
                fit.fitted[inside], plain_design(name, BINS)[inside] @ fit.parameters, rtol=1e-12
            )
            assert fit.parameters[1] == fit.estimates.exponent[0]


def test_windows_with_too_few_bins_have_no_fit():
    vector = DataVector.of(BinnedLogs(BINS, synthetic(1, 4, 0.0)))
    edges = BINS.edges
    for model in MODELS.values():
        needed = model.parameters + SPARE_BINS
        assert fit_power_law(vector, model, Window(edges[0], edges[needed])) is not None
        assert fit_power_law(vector, model, Window(edges[0], edges[needed - 1])) is None
        assert fit_power_law(vector, model, Window(60, 70)) is None


def test_the_prior_holds_a_correction_that_the_data_cannot():
    # far from the top, 1/r hardly changes over the window: without the prior the exponent would be lost
    bins = RankBins((200, 210, 220, 230, 240, 250, 260, 270))
    generator = np.random.default_rng(1)
    values = plain_design("power", bins) @ [0, 0.8] + 1e-3 * generator.normal(size=(10, bins.count))
    vector = DataVector.of(BinnedLogs(bins, values))
    window = Window(200, 270)
    two, three = (fit_power_law(vector, MODELS[name], window) for name in ("power", "top-correction"))
    assert abs(three.parameters[2]) < 1
    assert three.estimates.exponent[0] == pytest.approx(two.estimates.exponent[0], abs=1 / 200)
