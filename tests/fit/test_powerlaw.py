"""Fits of power laws against a slow, plain implementation, and exactly where the answer is known."""

from math import sqrt
from statistics import fmean, stdev

import numpy as np
import pytest
from scipy.optimize import brentq
from scipy.special import lambertw

from conetone.fit.logs import RankedLogs
from conetone.fit.models import KAPPA, KNEE_WIDTH, LOGARITHM_MODELS, MODELS, POWER_MODELS
from conetone.fit.powerlaw import SMALLEST_ERROR, SPARE_BINS, DataVector, fit_power_law
from conetone.fit.resample import jackknife_variance
from conetone.fit.shrinkage import shrunk_correlation
from conetone.fit.smoothcount import SmoothRanks
from conetone.fit.windows import RankBins, Window

SIZE = 160
BINS = RankBins((2, 3, 4, 5, 7, 9, 12, 16, 21, 28, 37, 50))
SMOOTH = SmoothRanks(tuple(np.geomspace(2, 50, 11)))
WINDOWS = [Window(2, 50), Window(3, 28), Window(5, 50)]
EVERY = [MODELS[name] for name in POWER_MODELS]
STEPS = [0.0, 0.01, 0.2]


def plain_w(r):
    return lambertw(r * np.exp(KAPPA)).real


# The terms after the exponent with their prior widths, and what has no parameter.
TOP = (lambda r: 1 / r, 1.0)
KNEE = (lambda r: r / SIZE, KNEE_WIDTH)
OTHER_KAPPA = (lambda r: 1 / (1 + plain_w(r)), 1.0)
CORRECTIONS = {
    "power": [],
    "top-correction": [TOP],
    "knee": [KNEE],
    "top-and-knee": [TOP, KNEE],
    "logarithm": [OTHER_KAPPA],
    "logarithm-and-knee": [OTHER_KAPPA, KNEE],
}


def plain_on(axis, function):
    if isinstance(axis, SmoothRanks):
        return [function(rank) for rank in axis.at]
    ranks = [range(low, high) for low, high in zip(axis.edges[:-1], axis.edges[1:], strict=True)]
    return [fmean(function(r) for r in of_bin) for of_bin in ranks]


def plain_design(model, axis=BINS):
    terms = [lambda r: 1.0, lambda r: -np.log(r), *(term for term, _ in CORRECTIONS[model])]
    return np.array([plain_on(axis, term) for term in terms]).T


def plain_offset(model, axis=BINS):
    has_logarithm = model in LOGARITHM_MODELS
    return np.array(plain_on(axis, lambda r: np.log(plain_w(r)) if has_logarithm else 0.0))


def with_priors(model, design, values, covariance):
    """A prior 0 ± width of a parameter is one more measurement."""
    for k, (_, width) in enumerate(CORRECTIONS[model]):
        design = np.vstack([design, np.eye(design.shape[1])[2 + k]])
        values = np.append(values, 0)
        covariance = np.pad(covariance, (0, 1))
        covariance[-1, -1] = width**2
    return design, values, covariance


def plain_linear_fit(design, values, covariance):
    """Parameters, gain and χ² from the normal equations."""
    weighted = np.linalg.solve(covariance, design)
    gain = np.linalg.solve(design.T @ weighted, weighted.T)
    parameters = gain @ values
    residuals = values - design @ parameters
    return parameters, gain, residuals @ np.linalg.solve(covariance, residuals)


def plain_scatter_about(model, axis, means, errors):
    """τ by a root finder on χ²(τ²) − ν (Paule & Mandel 1982)."""
    degrees = axis.count - 2  # a parameter with a prior is one more measurement, too
    design, values = plain_design(model, axis), means - plain_offset(model, axis)

    def excess(variance):
        covariance = np.diag(errors**2 + variance)
        return plain_linear_fit(*with_priors(model, design, values, covariance))[2] - degrees

    if excess(0.0) <= 0:
        return 0.0
    largest = 1.0
    while excess(largest) > 0:
        largest *= 2
    return sqrt(brentq(excess, 0, largest, xtol=1e-16, rtol=1e-14))


def plain_scatter(models, axis, means, errors):
    """That about the best of the models."""
    return min(plain_scatter_about(model.name, axis, means, errors) for model in models)


def plain_errors(values):
    found = np.array([stdev(column) / sqrt(len(values)) for column in values.T])
    return np.maximum(found, SMALLEST_ERROR)


def inside_of(axis, window):
    if isinstance(axis, SmoothRanks):
        return [
            b for b, rank in enumerate(axis.at) if window.first <= rank * 1.000001 and rank <= window.last
        ]
    edges = axis.edges
    return [b for b in range(axis.count) if window.first <= edges[b] and edges[b + 1] <= window.last]


def plain_fit(values, axis, model, window, weighting="diagonal", errors=None, models=EVERY):
    """Exponent, statistical error, misfit and χ² of one set of replicates, nothing stacked or shared."""
    means = np.array([fmean(column) for column in values.T])
    errors = plain_errors(values) if errors is None else errors
    correlation = shrunk_correlation(values) if weighting == "correlated" else np.eye(axis.count)
    tau = plain_scatter(models, axis, means, errors)
    inside = inside_of(axis, window)
    covariance = np.diag(errors) @ correlation @ np.diag(errors) + tau**2 * np.eye(axis.count)
    parameters, gain, chi2 = plain_linear_fit(
        *with_priors(
            model,
            plain_design(model, axis)[inside],
            (means - plain_offset(model, axis))[inside],
            covariance[np.ix_(inside, inside)],
        )
    )
    functional = gain[1][: len(inside)]
    projected = [functional @ row[inside] for row in values]
    statistical = stdev(projected) / sqrt(len(values)) if len(values) > 1 else None
    design = plain_design(model, axis)[inside]
    left = (means - plain_offset(model, axis))[inside] - design @ parameters
    own = sqrt(sum(left**2) / (len(inside) - design.shape[1]))
    return parameters[1], statistical, max(tau, own) * np.linalg.norm(functional), chi2


def synthetic(seed, replicates, steps, axis=BINS, exponent=0.8, correction=0.3):
    """A power law with a top correction, steps in rank, and noise correlated along the ranks."""
    generator = np.random.default_rng(seed)
    last = int(np.ceil(axis.ranks[-1] * 2))
    ranks = np.arange(1, last + 1)
    noise = 0.03 * generator.normal(size=(replicates, last))
    noise += 0.05 * generator.normal(size=(replicates, 1))
    noise += 0.02 * generator.normal(size=(replicates, 1)) * np.log(ranks)

    def curve(at):
        return 1 - exponent * np.log(at) + correction / at + steps * np.sin(9 * np.log(at))

    if isinstance(axis, SmoothRanks):
        return curve(axis.ranks) + np.array([np.interp(axis.ranks, ranks, row) for row in noise])
    return axis.average(curve(ranks) + noise)


@pytest.mark.parametrize("weighting", ["diagonal", "correlated"])
@pytest.mark.parametrize("axis", [BINS, SMOOTH], ids=["bins", "smooth"])
@pytest.mark.parametrize("steps", STEPS)
def test_every_copy_is_a_fit_of_its_replicates_alone(steps, axis, weighting):
    for seed, replicates in enumerate([4, 9, 14]):
        values = synthetic(seed, replicates, steps, axis)
        subsets = [values, *(np.delete(values, i, axis=0) for i in range(replicates))]
        models = EVERY if seed else [MODELS[name] for name in LOGARITHM_MODELS]
        vector = DataVector.of(RankedLogs(axis, values.copy()), SIZE, models, weighting)
        for model in models:
            window = WINDOWS[seed]
            found = fit_power_law(vector, model, window).estimates
            for copy in (0, 1, replicates // 2, replicates):
                plain = plain_fit(subsets[copy], axis, model.name, window, weighting, models=models)
                assert found.exponent[copy] == pytest.approx(plain[0], rel=1e-7)
                assert found.statistical[copy] == pytest.approx(plain[1], rel=1e-6)
                assert found.misfit[copy] == pytest.approx(plain[2], rel=1e-6, abs=1e-12)
                assert found.chi2[copy] == pytest.approx(plain[3], rel=1e-6)


@pytest.mark.parametrize("weighting", ["diagonal", "correlated"])
@pytest.mark.parametrize("model", POWER_MODELS)
def test_of_two_replicates_the_copies_reuse_the_errors_of_both(model, weighting):
    values = synthetic(5, 2, 0.05)
    vector = DataVector.of(RankedLogs(BINS, values.copy()), SIZE, EVERY, weighting)
    errors = plain_errors(values)
    found = fit_power_law(vector, MODELS[model], WINDOWS[0]).estimates
    for copy, subset in enumerate([values, values[1:], values[:1]]):
        # of so few no correlation is known, and the weights are diagonal
        exponent, _, misfit, chi2 = plain_fit(subset, BINS, model, WINDOWS[0], errors=errors)
        assert found.exponent[copy] == pytest.approx(exponent, rel=1e-7)
        assert found.misfit[copy] == pytest.approx(misfit, rel=1e-6, abs=1e-12)
        assert found.chi2[copy] == pytest.approx(chi2, rel=1e-6)
    assert found.statistical[0] == pytest.approx(plain_fit(values, BINS, model, WINDOWS[0])[1], rel=1e-7)
    assert (found.statistical[1:] == found.statistical[0]).all()


def test_means_and_errors_of_the_data_vector():
    values = synthetic(6, 7, 0.1)
    vector = DataVector.of(RankedLogs(BINS, values.copy()), SIZE, EVERY)
    assert vector.correlations is None
    for copy in range(8):
        subset = values if copy == 0 else np.delete(values, copy - 1, axis=0)
        np.testing.assert_allclose(vector.means[copy], [fmean(c) for c in subset.T], rtol=1e-12)
        expected = [stdev(c) / sqrt(len(subset)) for c in subset.T]
        np.testing.assert_allclose(vector.errors[copy], expected, rtol=1e-9)


@pytest.mark.parametrize("model", MODELS)
@pytest.mark.parametrize("steps", [0.0, 0.003, 0.03, 0.3, 3.0])
def test_the_scatter_makes_chi_squared_equal_its_degrees_of_freedom(steps, model):
    for seed in range(3):
        values = synthetic(seed, 12, steps, correction=0)
        vector = DataVector.of(RankedLogs(BINS, values.copy()), SIZE, [MODELS[model]])
        for copy in (0, 12):
            expected = plain_scatter_about(model, BINS, vector.means[copy], vector.errors[copy])
            assert vector.scatter[copy] == pytest.approx(expected, rel=1e-6)
            fit = fit_power_law(vector, MODELS[model], Window(2, 50))
            chi2 = fit.estimates.chi2[copy]
            assert chi2 == pytest.approx(fit.degrees, rel=1e-5) if expected else chi2 <= fit.degrees


@pytest.mark.parametrize("seed", range(5))
def test_the_scatter_of_errors_of_any_sizes(seed):
    # errors from 1e-9 to 1, steps from below them to far above
    generator = np.random.default_rng(seed)
    for _ in range(20):
        errors = 10.0 ** generator.uniform(-9, 0, size=BINS.count)
        steps = 10.0 ** generator.uniform(-6, 1) * generator.normal(size=BINS.count)
        noise = generator.normal(size=(6, BINS.count))
        values = plain_design("power") @ [1, 0.7] + steps + noise * errors
        vector = DataVector.of(RankedLogs(BINS, values.copy()), SIZE, EVERY)
        for copy in (0, 3):
            expected = plain_scatter(EVERY, BINS, vector.means[copy], vector.errors[copy])
            assert vector.scatter[copy] == pytest.approx(expected, rel=1e-5, abs=1e-12)


def test_the_scatter_is_about_the_best_of_the_models():
    for seed in range(20):
        values = synthetic(seed, 9, 0.05, correction=0.8)
        data = RankedLogs(BINS, values)
        together = DataVector.of(data, SIZE, EVERY).scatter
        alone = [DataVector.of(data, SIZE, [model]).scatter for model in EVERY]
        np.testing.assert_array_equal(together, np.min(alone, axis=0))
        assert (together <= alone[0]).all()
    # a top correction is no scatter where a model has it
    curve = np.tile(plain_design("top-correction") @ [1, 0.8, 0.7], (5, 1))
    curve = curve + 1e-4 * np.random.default_rng(1).normal(size=curve.shape)
    data = RankedLogs(BINS, curve)
    assert DataVector.of(data, SIZE, [MODELS["power"]]).scatter[0] > 0.02
    assert DataVector.of(data, SIZE, EVERY).scatter[0] < 1e-3


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_the_scatter_is_that_of_the_steps(seed):
    # steps independent from bin to bin, of standard deviation 0.2, on data without other noise to speak of
    generator = np.random.default_rng(seed)
    found = []
    for _ in range(100):
        steps = 0.2 * generator.normal(size=BINS.count)
        values = 1e-6 * generator.normal(size=(5, BINS.count)) + steps + plain_design("power") @ [1, 0.7]
        vector = DataVector.of(RankedLogs(BINS, values), SIZE, [MODELS["power"]])
        found.append(vector.scatter[0] ** 2)
    assert abs(np.mean(found) - 0.04) < 5 * np.std(found, ddof=1) / 10


@pytest.mark.parametrize("window", WINDOWS)
@pytest.mark.parametrize("model", POWER_MODELS)
def test_a_noise_free_power_law_is_found_exactly(model, window):
    amplitudes = np.array([0.5, 1, 1.5, 3])
    for exponent in (0.5, 2 / 3, 1.0, 1.7):
        values = np.log(amplitudes)[:, np.newaxis] + plain_design("power") @ [0, exponent]
        for weighting in ("diagonal", "correlated"):
            vector = DataVector.of(RankedLogs(BINS, values.copy()), SIZE, EVERY, weighting)
            np.testing.assert_array_equal(vector.scatter, 0)
            fit = fit_power_law(vector, MODELS[model], window)
            # replicates that differ by their amplitude alone agree about the exponent
            tolerance = 1e-10 if weighting == "diagonal" else 1e-8
            np.testing.assert_allclose(fit.estimates.exponent, exponent, rtol=tolerance)
            assert fit.estimates.statistical.max() < tolerance
            assert fit.estimates.misfit.max() < tolerance
            assert fit.estimates.chi2.max() < tolerance
            assert fit.parameters[0] == pytest.approx(np.log(amplitudes).mean(), rel=1e-6)


@pytest.mark.parametrize("model", LOGARITHM_MODELS)
def test_a_noise_free_logarithm_is_found_exactly(model):
    models = [MODELS[name] for name in LOGARITHM_MODELS]
    for axis in (BINS, SMOOTH):
        amplitudes = np.array([[0.5], [1], [1.5], [3]])
        curve = plain_design("power", axis) @ [0, 1.0] + plain_offset("logarithm", axis)
        vector = DataVector.of(RankedLogs(axis, amplitudes + curve), SIZE, models)
        fit = fit_power_law(vector, MODELS[model], Window(2, 50))
        np.testing.assert_allclose(fit.estimates.exponent, 1, rtol=1e-9)
        np.testing.assert_allclose(fit.fitted, curve + amplitudes.mean(), rtol=1e-9)
        np.testing.assert_allclose(fit.parameters[2:], 0, atol=1e-7)


def test_identical_replicates_are_no_division_by_zero():
    values = np.tile(plain_design("top-correction") @ [0.3, 0.9, 0.5], (4, 1))
    for weighting in ("diagonal", "correlated"):
        vector = DataVector.of(RankedLogs(BINS, values.copy()), SIZE, [MODELS["power"]], weighting)
        fit = fit_power_law(vector, MODELS["top-correction"], Window(2, 50))
        assert np.isfinite(fit.estimates.exponent).all()
        assert fit.estimates.statistical.max() < 1e-12
        assert (fit.estimates.misfit > 0).all()  # a power law alone leaves the correction as scatter
        straight = np.tile(plain_design("power") @ [0.3, 0.9], (4, 1))
        vector = DataVector.of(RankedLogs(BINS, straight), SIZE, EVERY, weighting)
        fit = fit_power_law(vector, MODELS["power"], Window(2, 50))
        np.testing.assert_allclose(fit.estimates.exponent, 0.9, rtol=1e-9)


@pytest.mark.parametrize("model", POWER_MODELS)
def test_the_statistical_error_is_that_of_delete_one_refits(model):
    # brute force: the same weights, every fit done again without one replicate
    for seed in range(5):
        values = synthetic(seed, 11, 0.05)
        vector = DataVector.of(RankedLogs(BINS, values.copy()), SIZE, EVERY)
        total = np.diag(vector.errors[0] ** 2 + vector.scatter[0] ** 2)
        refits = []
        for i in range(len(values)):
            means = np.array([fmean(column) for column in np.delete(values, i, axis=0).T])
            fit = plain_linear_fit(*with_priors(model, plain_design(model), means, total))
            refits.append(fit[0][1])
        found = fit_power_law(vector, MODELS[model], Window(2, 50)).estimates
        assert found.statistical[0] ** 2 == pytest.approx(jackknife_variance(np.array(refits)), rel=1e-7)


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_weighing_by_correlations_sharpens_exponents_and_errors_say_so(seed):
    # exponents of repeated samples, of noise that is mostly common to all ranks
    generator = np.random.default_rng(seed)
    ranks, power = BINS.ranks, MODELS["power"]
    found = {"diagonal": [], "correlated": []}
    for _ in range(150):
        noise = 0.3 * generator.normal(size=(24, 1)) * np.sqrt(ranks / 10)
        noise = noise + 0.02 * generator.normal(size=(24, BINS.count))
        values = plain_design("power") @ [1, 0.7] + noise
        for weighting, results in found.items():
            vector = DataVector.of(RankedLogs(BINS, values.copy()), SIZE, [power], weighting)
            estimates = fit_power_law(vector, power, Window(2, 50)).estimates
            results.append((estimates.exponent[0], estimates.statistical[0]))
    scatter = {}
    for weighting, results in found.items():
        exponents, errors = np.array(results).T
        scatter[weighting] = exponents.std(ddof=1)
        assert abs(exponents.mean() - 0.7) < 5 * scatter[weighting] / np.sqrt(150)
        # the weights are taken from the same replicates, which the error of one fit does not know of
        assert 0.7 < np.sqrt((errors**2).mean()) / scatter[weighting] < 1.3
    assert scatter["correlated"] < scatter["diagonal"] / 1.5


@pytest.mark.parametrize("axis", [BINS, SMOOTH], ids=["bins", "smooth"])
def test_what_a_fit_says_of_itself(axis):
    values = synthetic(1, 8, 0.05, axis)
    for name, model in MODELS.items():
        vector = DataVector.of(RankedLogs(axis, values), SIZE, [model])
        for window in WINDOWS:
            fit = fit_power_law(vector, model, window)
            inside = inside_of(axis, window)
            assert fit.bins_cut == axis.count - len(inside)
            # a prior is one more measurement, its parameter one more to find
            assert fit.degrees == len(inside) - 2
            assert np.isnan(np.delete(fit.fitted, inside)).all()
            curve = plain_design(name, axis) @ fit.parameters + plain_offset(name, axis)
            np.testing.assert_allclose(fit.fitted[inside], curve[inside], rtol=1e-11)
            assert fit.parameters[1] == fit.estimates.exponent[0]


def test_windows_with_too_few_bins_have_no_fit():
    vector = DataVector.of(RankedLogs(BINS, synthetic(1, 4, 0.0)), SIZE, EVERY)
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
    vector = DataVector.of(RankedLogs(bins, values), 1e6, EVERY)
    window = Window(200, 270)
    fits = {model.name: fit_power_law(vector, model, window) for model in EVERY}
    assert abs(fits["top-correction"].parameters[2]) < 1
    alone = fits["power"].estimates.exponent[0]
    assert fits["top-correction"].estimates.exponent[0] == pytest.approx(alone, abs=1 / 200)
    # b r/n with |b| of order ten and n = 10⁶ moves the slope at rank 235 by a thousandth
    assert fits["knee"].estimates.exponent[0] == pytest.approx(alone, abs=10 * 235 / 1e6)
