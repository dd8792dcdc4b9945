"""The jackknife through the whole chain against doing everything again without one replicate.

The reference below goes from spectra to the exponent at infinite size with plain loops, for one set of
replicates; nothing is stacked, shared or updated. Every copy of the package must equal it. From elsewhere it
takes what is tested on its own: cut-offs of smooth counts, and shrunk correlations.
"""

from functools import cache
from itertools import combinations, pairwise
from math import ceil, exp, log, sqrt
from statistics import fmean, stdev

import numpy as np
import pytest
from scipy.optimize import brentq

from conetone.aggregate.scaling import LARGEST_TERM, WAY_SHARE
from conetone.aggregate.series import HIDDEN_LOGARITHM, candidates_of, series_exponent
from conetone.fit.models import KNEE_WIDTH
from conetone.fit.shrinkage import shrunk_correlation
from conetone.fit.size import SizeSpectra, WindowSettings, fit_size
from conetone.fit.smoothcount import log_cutoffs
from conetone.fit.windows import Growth, WindowRule

SIZES = (200, 320, 500, 800)
REPLICATES = (4, 5, 6, 4)
# Coefficients of n^0.5 at the lower ends and of n^0.75 at the upper ends.
LOWER, UPPER = (0.25, 0.4), (0.25, 0.35)
POINTS = 10
OMEGAS = (0.5, 1.0)
MOST_SIZES_CUT = 1
# Terms after the exponent with the widths of their priors, given the size.
MODELS = {
    "power": lambda size: [],
    "top-correction": lambda size: [(lambda r: 1 / r, 1.0)],
    "knee": lambda size: [(lambda r: r / size, KNEE_WIDTH)],
}


def synthetic_spectra(seed, steps):
    """Falling spectra by size: a power law, a top correction, steps in rank, noise of each replicate."""
    generator = np.random.default_rng(seed)
    spectra = {}
    for size, replicates in zip(SIZES, REPLICATES, strict=True):
        ranks = np.arange(1, size // 2)
        curve = log(size) - (0.75 + size**-0.7) * np.log(ranks) + 0.4 / ranks
        curve = curve + steps * np.sin(8 * np.log(ranks))
        noise = 0.03 * generator.normal(size=(replicates, 1)) * (1 + np.log(ranks))
        noise = noise + 0.02 * generator.normal(size=(replicates, len(ranks)))
        spectra[size] = [np.sort(np.exp(curve + row))[::-1] for row in noise]
    return spectra


# --- the plain reference ---------------------------------------------------------------------------------


def plain_windows(size):
    return [(low * size**0.5, high * size**0.75) for low in LOWER for high in UPPER]


def plain_points(size, parts_in_all):
    """All ends of windows, with even steps in log rank between them."""
    ends = sorted({end for window in plain_windows(size) for end in window})
    points = {ends[-1]}
    for low, high in pairwise(ends):
        parts = max(1, round(parts_in_all * log(high / low) / log(ends[-1] / ends[0])))
        points |= {low * (high / low) ** (k / parts) for k in range(parts)}
    return sorted(points)


def plain_data(spectra, size, estimator):
    """Ranks behind each point, values by replicate, and the points inside each window."""
    if estimator == "smooth-count":
        at = plain_points(size, POINTS - 1)
        values = [log_cutoffs(spectrum, np.array(at), complete=True) for spectrum in spectra]
        inside = [
            [b for b, rank in enumerate(at) if first * (1 - 1e-9) <= rank <= last * (1 + 1e-9)]
            for first, last in plain_windows(size)
        ]
        return [[rank] for rank in at], np.array(values), inside
    edges = sorted({ceil(edge - 1e-9) for edge in plain_points(size, POINTS)})
    bins = [range(low, high) for low, high in pairwise(edges)]
    values = [[fmean(log(s[r - 1]) for r in ranks) for ranks in bins] for s in spectra]
    inside = [
        [b for b, ranks in enumerate(bins) if ranks[0] >= first and ranks[-1] < last]
        for first, last in plain_windows(size)
    ]
    return bins, np.array(values), inside


def plain_linear_fit(design, values, covariance, priors):
    """Parameters, gain of the values and χ²; `priors`: (row, width) of parameters about zero."""
    for row, width in priors:
        design, values = np.vstack([design, row]), np.append(values, 0.0)
        covariance = np.pad(covariance, (0, 1))
        covariance[-1, -1] = width**2
    weighted = np.linalg.solve(covariance, design)
    gain = np.linalg.solve(design.T @ weighted, weighted.T)
    parameters = gain @ values
    residuals = values - design @ parameters
    chi2 = float(residuals @ np.linalg.solve(covariance, residuals))
    return parameters, gain[:, : len(values) - len(priors)], chi2


def plain_model(name, size, ranks_of_points):
    """Design and priors of a model."""
    further = MODELS[name](size)
    terms = [lambda r: 1.0, lambda r: -log(r), *(term for term, _ in further)]
    design = np.array([[fmean(term(r) for r in ranks) for term in terms] for ranks in ranks_of_points])
    rows = np.eye(len(terms))[2:]
    return design, [(row, width) for row, (_, width) in zip(rows, further, strict=True)]


def plain_scatter(name, size, ranks, means, errors):
    design, priors = plain_model(name, size, ranks)

    def excess(variance):
        return plain_linear_fit(design, means, np.diag(errors**2 + variance), priors)[2] - (len(ranks) - 2)

    return sqrt(brentq(excess, 0, 10, xtol=1e-16, rtol=1e-14)) if excess(0.0) > 0 else 0.0


def plain_size(spectra, size, estimator, weighting):
    """Every candidate of one size: (exponent, statistical, misfit, χ², parameters, points cut)."""
    ranks, values, windows = plain_data(spectra, size, estimator)
    means = np.array([fmean(column) for column in values.T])
    errors = np.array([stdev(column) / sqrt(len(spectra)) for column in values.T])
    correlation = shrunk_correlation(values) if weighting == "correlated" else np.eye(len(ranks))
    tau = min(plain_scatter(name, size, ranks, means, errors) for name in MODELS)
    covariance = np.outer(errors, errors) * correlation + tau**2 * np.eye(len(ranks))
    candidates = []
    for inside in windows:
        for name in MODELS:
            design, priors = plain_model(name, size, ranks)
            if len(inside) < design.shape[1] + 2:
                candidates.append(None)
                continue
            parameters, gain, chi2 = plain_linear_fit(
                design[inside], means[inside], covariance[np.ix_(inside, inside)], priors
            )
            projected = [gain[1] @ row[inside] for row in values]
            statistical = stdev(projected) / sqrt(len(spectra))
            left = means[inside] - design[inside] @ parameters
            own = sqrt(sum(left**2) / (len(inside) - design.shape[1]))
            misfit = max(tau, own) * sqrt(sum(gain[1] ** 2))
            cut = len(ranks) - len(inside)
            candidates.append((parameters[1], statistical, misfit, chi2, len(parameters), cut))
    return candidates


def plain_average(values):
    """Of (criterion, value)."""
    lowest = min(criterion for criterion, _ in values)
    weights = [exp(-(criterion - lowest) / 2) for criterion, _ in values]
    return sum(w * value for w, (_, value) in zip(weights, values, strict=True)) / sum(weights)


def plain_exponent(by_size):
    """The exponent at infinite size, the variance hidden in its average, and that of a hidden logarithm."""
    curves, at_largest = [], []
    windows = [window for window in plain_windows(SIZES[-1]) for _ in MODELS]
    for candidate, (first, last) in zip(zip(*by_size, strict=True), windows, strict=True):
        fitted = [s for s, fit in enumerate(candidate) if fit is not None]
        if len(SIZES) - 1 not in fitted:
            continue
        criterion = fmean(candidate[s][3] + 2 * candidate[s][4] + 2 * candidate[s][5] for s in fitted)
        at_largest.append((criterion, candidate[-1][0]))
        for form in [*((omega,) for omega in OMEGAS), *combinations(OMEGAS, 2)]:
            tried = []
            for cut in range(MOST_SIZES_CUT + 1):
                used = [s for s in fitted if s >= cut]
                if len(used) < len(form) + 2 or used in tried:
                    continue
                tried.append(used)
                alpha = np.array([candidate[s][0] for s in used])
                statistical = np.array([candidate[s][1] ** 2 for s in used])
                total = np.array([candidate[s][1] ** 2 + candidate[s][2] ** 2 for s in used])
                design = np.array([[1.0, *(SIZES[s] ** -omega for omega in form)] for s in used])
                widths = [LARGEST_TERM * SIZES[0] ** omega for omega in form]
                priors = list(zip(np.eye(1 + len(form))[1:], widths, strict=True))
                found, gain, chi2 = plain_linear_fit(design, alpha, np.diag(total), priors)
                widening = max(chi2 / (len(used) - 1), 1)
                hidden = max(widening * (gain[0] ** 2 @ total) - gain[0] ** 2 @ statistical, 0)
                unused = len(SIZES) - len(used)
                own = chi2 + 2 * (1 + len(form)) + 2 * unused
                logarithm = HIDDEN_LOGARITHM / log(sqrt(first * last))
                curves.append((criterion + own, found[0], hidden, logarithm))
    value = plain_average([(criterion, a) for criterion, a, *_ in curves])
    hidden = plain_average([(criterion, h + (a - value) ** 2) for criterion, a, h, _ in curves])
    way = value - plain_average(at_largest)
    logarithm = plain_average([(criterion, each) for criterion, *_, each in curves])
    return value, hidden + (WAY_SHARE * way) ** 2, logarithm


# --- the package -----------------------------------------------------------------------------------------


def package_exponent(spectra, estimator, weighting):
    """The series with all copies, through the package's own chain."""
    rules = tuple(WindowRule(Growth(low, 0.5), Growth(high, 0.75)) for low in LOWER for high in UPPER)
    settings = WindowSettings(rules, 1, POINTS, tuple(MODELS), weighting=weighting)
    fits = [fit_size(SizeSpectra(size, spectra[size], complete=True), settings, estimator) for size in SIZES]
    return series_exponent(SIZES, REPLICATES, candidates_of(fits, settings), OMEGAS, MOST_SIZES_CUT)


@pytest.mark.parametrize(
    ("estimator", "weighting", "steps", "seed"),
    [
        ("rank-bins", "diagonal", 0.0, 1),
        ("rank-bins", "diagonal", 0.1, 2),
        ("rank-bins", "correlated", 0.02, 3),
        ("smooth-count", "diagonal", 0.1, 4),
        ("smooth-count", "correlated", 0.1, 5),
    ],
)
def test_every_copy_is_the_whole_chain_without_one_replicate(estimator, weighting, steps, seed):
    spectra = synthetic_spectra(seed, steps)

    @cache
    def of_size(size, left_out):
        kept = [s for i, s in enumerate(spectra[size]) if i != left_out]
        return plain_size(kept, size, estimator, weighting)

    result = package_exponent(spectra, estimator, weighting)
    found = result.found.limit
    value, hidden, logarithm = plain_exponent([of_size(size, None) for size in SIZES])
    assert 0 < result.found.two_terms < 1
    assert found.value[0, 0] == pytest.approx(value, rel=1e-8)
    assert found.hidden_variance[0, 0] == pytest.approx(hidden, rel=1e-5)
    copy, variance = 0, 0.0
    for size, replicates in zip(SIZES, REPLICATES, strict=True):
        without = []
        for left_out in range(replicates):
            value_without, hidden_without, _ = plain_exponent(
                [of_size(each, left_out if each == size else None) for each in SIZES]
            )
            without.append(value_without)
            copy += 1
            assert found.value[copy, 0] == pytest.approx(value_without, rel=1e-8)
            assert found.hidden_variance[copy, 0] == pytest.approx(hidden_without, rel=1e-5)
        variance += (replicates - 1) / replicates * sum((x - fmean(without)) ** 2 for x in without)
    assert copy + 1 == len(found.value)
    assert result.limit.value[0] == pytest.approx(value, rel=1e-8)
    assert result.limit.statistical[0] == pytest.approx(sqrt(variance), rel=1e-5)
    assert result.limit.systematic[0] == pytest.approx(sqrt(hidden + logarithm**2), rel=1e-5)


@pytest.mark.parametrize("estimator", ["rank-bins", "smooth-count"])
def test_points_are_those_of_the_package(estimator):
    spectra = synthetic_spectra(1, 0.0)
    rules = tuple(WindowRule(Growth(low, 0.5), Growth(high, 0.75)) for low in LOWER for high in UPPER)
    settings = WindowSettings(rules, 1, POINTS, ("power",))
    for size in SIZES:
        found = fit_size(SizeSpectra(size, spectra[size], complete=True), settings, estimator)
        ranks, values, inside = plain_data(spectra[size], size, estimator)
        np.testing.assert_allclose(found.vector.data.values, values, rtol=1e-12)
        expected = [exp(fmean(log(r) for r in of_point)) for of_point in ranks]
        np.testing.assert_allclose(found.vector.data.axis.ranks, expected, rtol=1e-12)
        for rule, points in zip(rules, inside, strict=True):
            assert list(range(len(ranks)))[found.vector.data.axis.inside(rule.at(size, 1))] == points
