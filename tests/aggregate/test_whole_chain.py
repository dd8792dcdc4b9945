"""The jackknife through the whole chain against doing everything again without one replicate.

The reference below goes from spectra to the exponent at infinite size with plain loops, for one set of
replicates; nothing is stacked, shared or updated. Every copy of the package must equal it.
"""

from itertools import pairwise
from math import ceil, exp, hypot, log, sqrt
from statistics import fmean, stdev

import numpy as np
import pytest
from scipy.optimize import brentq

from conetone.aggregate.resample import Candidate, measure, stack_copies
from conetone.aggregate.scaling import extrapolate
from conetone.fit.models import MODELS
from conetone.fit.powerlaw import DataVector, fit_power_law
from conetone.fit.ranking import bin_logs
from conetone.fit.windows import Growth, WindowRule, bins_of_windows

SIZES = (200, 400, 800)
REPLICATES = (4, 3, 5)
RULES = [(0.25, 0.5, 0.25, 0.75), (0.4, 0.5, 0.35, 0.75)]
BINS = 12
OMEGAS = (0.5, 1.0)
MOST_SIZES_CUT = 1


def synthetic_spectra(seed, steps):
    """Falling spectra by size: a power law, a top correction, steps in rank, noise of each replicate."""
    generator = np.random.default_rng(seed)
    spectra = {}
    for size, replicates in zip(SIZES, REPLICATES, strict=True):
        ranks = np.arange(1, size // 2)
        curve = log(size) - 0.75 * np.log(ranks) + 0.4 / ranks + steps * np.sin(8 * np.log(ranks))
        noise = 0.03 * generator.normal(size=(replicates, 1)) * (1 + np.log(ranks))
        noise = noise + 0.02 * generator.normal(size=(replicates, len(ranks)))
        spectra[size] = [np.sort(np.exp(curve + row))[::-1] for row in noise]
    return spectra


# --- the plain reference ---------------------------------------------------------------------------------


def plain_bins(size):
    """Windows of a size, and edges that hold every end."""
    windows = [(c1 * size**b1, c2 * size**b2) for c1, b1, _, _ in RULES for _, _, c2, b2 in RULES]
    ends = sorted({end for window in windows for end in window})
    edges = set()
    for low, high in pairwise(ends):
        parts = max(1, round(BINS * log(high / low) / log(ends[-1] / ends[0])))
        edges |= {ceil(low * (high / low) ** (k / parts) - 1e-9) for k in range(parts + 1)}
    return windows, sorted(edges)


def plain_linear_fit(rows, values, errors):
    """Parameters, gain and χ² from the normal equations."""
    design, weights = np.array(rows, dtype=float), np.diag(np.array(errors) ** -2.0)
    gain = np.linalg.solve(design.T @ weights @ design, design.T @ weights)
    parameters = gain @ values
    return parameters, gain, float((((values - design @ parameters) / errors) ** 2).sum())


def plain_size(spectra, size):
    """Every candidate of one size: (exponent, statistical, misfit, χ², parameters, bins cut)."""
    windows, edges = plain_bins(size)
    bins = [range(low, high) for low, high in pairwise(edges)]
    values = [[fmean(log(s[r - 1]) for r in ranks) for ranks in bins] for s in spectra]
    columns = list(zip(*values, strict=True))
    means = np.array([fmean(column) for column in columns])
    errors = np.array([stdev(column) / sqrt(len(spectra)) for column in columns])
    terms = [[1.0, fmean(-log(r) for r in ranks), fmean(1 / r for r in ranks)] for ranks in bins]
    straight = [row[:2] for row in terms]

    def excess(variance):
        return plain_linear_fit(straight, means, np.sqrt(errors**2 + variance))[2] - (len(bins) - 2)

    tau = sqrt(brentq(excess, 0, 10, xtol=1e-16, rtol=1e-14)) if excess(0.0) > 0 else 0.0
    candidates = []
    for first, last in windows:
        inside = [b for b, ranks in enumerate(bins) if ranks[0] >= first and ranks[-1] < last]
        for parameters in (2, 3):
            rows = [terms[b][:parameters] for b in inside]
            data = [means[b] for b in inside]
            total = [hypot(errors[b], tau) for b in inside]
            if len(inside) < parameters + 2:
                candidates.append(None)
                continue
            if parameters == 3:
                rows, data, total = [*rows, [0, 0, 1]], [*data, 0.0], [*total, 1.0]
            found, gain, chi2 = plain_linear_fit(rows, np.array(data), np.array(total))
            functional = gain[1][: len(inside)]
            projected = [sum(g * row[b] for g, b in zip(functional, inside, strict=True)) for row in values]
            candidates.append(
                (
                    found[1],
                    stdev(projected) / sqrt(len(spectra)),
                    tau * sqrt(sum(functional**2)),
                    chi2,
                    parameters,
                    len(bins) - len(inside),
                )
            )
    return candidates


def plain_exponent(spectra):
    """The exponent at infinite size, and the variance hidden in its average."""
    by_size = [plain_size(spectra[size], size) for size in SIZES]
    lines = []
    for candidate in zip(*by_size, strict=True):
        fitted = [s for s, fit in enumerate(candidate) if fit is not None]
        if len(SIZES) - 1 not in fitted:
            continue
        criterion = fmean(candidate[s][3] + 2 * candidate[s][4] + 2 * candidate[s][5] for s in fitted)
        for omega in OMEGAS:
            for cut in range(MOST_SIZES_CUT + 1):
                used = [s for s in fitted if s >= cut]
                if len(used) < 3:
                    continue
                alpha = np.array([candidate[s][0] for s in used])
                statistical = np.array([candidate[s][1] ** 2 for s in used])
                total = np.array([candidate[s][1] ** 2 + candidate[s][2] ** 2 for s in used])
                rows = [[1.0, SIZES[s] ** -omega] for s in used]
                (limit, _), gain, chi2 = plain_linear_fit(rows, alpha, np.sqrt(total))
                widening = max(chi2 / (len(used) - 2), 1)
                hidden = max(widening * (gain[0] ** 2 @ total) - gain[0] ** 2 @ statistical, 0)
                lines.append((criterion + chi2 + 2 * cut, limit, hidden))
    lowest = min(criterion for criterion, _, _ in lines)
    weights = [exp(-(criterion - lowest) / 2) for criterion, _, _ in lines]
    value = sum(w * a for w, (_, a, _) in zip(weights, lines, strict=True)) / sum(weights)
    hidden = sum(w * (h + (a - value) ** 2) for w, (_, a, h) in zip(weights, lines, strict=True)) / sum(
        weights
    )
    return value, hidden


# --- the package -----------------------------------------------------------------------------------------


def package_exponent(spectra):
    """Averages with all copies, through the package's own chain."""
    rules = [WindowRule(Growth(c1, b1), Growth(c2, b2)) for c1, b1, _, _ in RULES for _, _, c2, b2 in RULES]
    vectors, windows = [], []
    for size in SIZES:
        windows.append([rule.at(size, 1) for rule in rules])
        vectors.append(DataVector.of(bin_logs(spectra[size], bins_of_windows(windows[-1], BINS))))
    candidates = []
    for r in range(len(rules)):
        for model in ("power", "top-correction"):
            fits = [fit_power_law(v, MODELS[model], w[r]) for v, w in zip(vectors, windows, strict=True)]
            candidates.append(
                Candidate(
                    MODELS[model].parameters,
                    [fit and fit.estimates for fit in fits],
                    [fit.bins_cut if fit else 0 for fit in fits],
                )
            )
    estimates = stack_copies(SIZES, [len(spectra[size]) for size in SIZES], candidates)
    return extrapolate(estimates, OMEGAS, MOST_SIZES_CUT).limit


@pytest.mark.parametrize("steps", [0.0, 0.1])
@pytest.mark.parametrize("seed", [1, 2, 3])
def test_every_copy_is_the_whole_chain_without_one_replicate(seed, steps):
    spectra = synthetic_spectra(seed, steps)
    found = package_exponent(spectra)
    value, hidden = plain_exponent(spectra)
    assert found.value[0, 0] == pytest.approx(value, rel=1e-8)
    assert found.hidden_variance[0, 0] == pytest.approx(hidden, rel=1e-5)
    copy, variance = 0, 0.0
    for size, replicates in zip(SIZES, REPLICATES, strict=True):
        without = []
        for left_out in range(replicates):
            kept = [s for i, s in enumerate(spectra[size]) if i != left_out]
            value, hidden = plain_exponent({**spectra, size: kept})
            without.append(value)
            copy += 1
            assert found.value[copy, 0] == pytest.approx(value, rel=1e-8)
            assert found.hidden_variance[copy, 0] == pytest.approx(hidden, rel=1e-5)
        variance += (replicates - 1) / replicates * sum((x - fmean(without)) ** 2 for x in without)
    assert copy + 1 == len(found.value)
    measured = measure(found, REPLICATES)
    assert measured.statistical[0] == pytest.approx(sqrt(variance), rel=1e-5)


def test_windows_and_bins_are_those_of_the_package():
    for size in SIZES:
        windows, edges = plain_bins(size)
        rules = [
            WindowRule(Growth(c1, b1), Growth(c2, b2)) for c1, b1, _, _ in RULES for _, _, c2, b2 in RULES
        ]
        found = [rule.at(size, 1) for rule in rules]
        np.testing.assert_allclose([(window.first, window.last) for window in found], windows, rtol=1e-14)
        assert list(bins_of_windows(found, BINS).edges) == edges
