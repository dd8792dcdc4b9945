"""Known exponents put into synthetic spectra must come back inside their intervals."""

from itertools import product
from math import log, sqrt

import numpy as np
import pytest

from conetone.aggregate.resample import Candidate, measure, stack_copies
from conetone.aggregate.scaling import extrapolate
from conetone.fit.models import MODELS
from conetone.fit.powerlaw import DataVector, fit_power_law
from conetone.fit.ranking import bin_logs
from conetone.fit.windows import Growth, WindowRule, bins_of_windows

SIZES = (256, 362, 512, 724, 1024)
REPLICATES = 16
RULES = [
    WindowRule(Growth.parse(first), Growth.parse(last))
    for first, last in product(("0.25 * n^0.5", "0.4 * n^0.5"), ("0.25 * n^0.75", "0.35 * n^0.75"))
]
INJECTIONS = 200


def synthetic_spectra(generator, size, exponent, correction):
    """A power law with a top correction; replicates differ in amplitude, in slope and from rank to rank."""
    ranks = np.arange(1, size // 4 + 1)
    curve = log(size) - exponent * np.log(ranks) + correction / ranks
    amplitude, slope = generator.normal(size=(2, REPLICATES, 1))
    noise = 0.05 * amplitude + 0.02 * slope * np.log(ranks)
    noise = noise + 0.05 * generator.normal(size=(REPLICATES, len(ranks)))
    return list(np.exp(curve + noise))


def measured_exponent(generator, exponent, correction):
    """Value, statistical and total error of one injection, through the package's own chain."""
    by_size = []
    for size in SIZES:
        windows = [rule.at(size, 2) for rule in RULES]
        bins = bins_of_windows(windows, 12)
        vector = DataVector.of(bin_logs(synthetic_spectra(generator, size, exponent, correction), bins))
        by_size.append([fit_power_law(vector, model, w) for w in windows for model in MODELS.values()])
    candidates = [
        Candidate(
            model.parameters,
            [fit and fit.estimates for fit in fits],
            [fit.bins_cut if fit else 0 for fit in fits],
        )
        for (_, model), fits in zip(product(RULES, MODELS.values()), zip(*by_size, strict=True), strict=True)
    ]
    replicates = [REPLICATES] * len(SIZES)
    estimates = stack_copies(SIZES, replicates, candidates)
    found = measure(extrapolate(estimates, (0.5, 0.75, 1.0), 2, np.array([np.inf])).limit, replicates)
    return found.value[0], found.statistical[0], found.total[0]


@pytest.fixture(scope="module")
def pulls():
    """(value − truth) over the total error, one for each injection; and over the statistical error alone."""
    found = []
    for seed in range(INJECTIONS):
        generator = np.random.default_rng(seed)
        exponent, correction = generator.uniform(0.5, 1.2), generator.uniform(-0.8, 0.8)
        value, statistical, total = measured_exponent(generator, exponent, correction)
        found.append([(value - exponent) / total, (value - exponent) / statistical])
    return np.array(found).T


@pytest.mark.parametrize(("sigmas", "promised"), [(1.0, 0.683), (2.0, 0.954)])
def test_intervals_hold_the_truth_as_often_as_they_say(pulls, sigmas, promised):
    # Coverage of 200 injections has a binomial error of 3.3 % at 68 %, 1.5 % at 95 %; two of them are
    # allowed, which for one sigma means at least 62 %.
    covered = (np.abs(pulls[0]) < sigmas).mean()
    error = sqrt(promised * (1 - promised) / INJECTIONS)
    assert covered > promised - 2 * error


def test_intervals_are_not_so_wide_that_they_say_nothing(pulls):
    # an error five times too large would cover everything: pulls must scatter by more than 1/3
    assert pulls[0].std(ddof=1) > 1 / 3


def test_the_value_is_not_biased_beyond_its_error(pulls):
    mean, error = pulls[0].mean(), pulls[0].std(ddof=1) / sqrt(INJECTIONS)
    assert abs(mean) < 5 * error
