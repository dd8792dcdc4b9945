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
INJECTIONS = 100
# What is put in beside the exponent: nothing but a top correction; an exponent that drifts as n^−0.6, an ω
# that no scaling form has; steps in log rank, as multiplets make them, that no model has.
KINDS = ("pure", "drifting", "stepped")


def synthetic_spectra(generator, size, exponent, correction, kind):
    """A power law with a top correction; replicates differ in amplitude, in slope and from rank to rank."""
    ranks = np.arange(1, size // 4 + 1)
    if kind == "drifting":
        exponent = exponent + size**-0.6
    curve = log(size) - exponent * np.log(ranks) + correction / ranks
    if kind == "stepped":
        curve = curve + 0.05 * np.sign(np.sin(2 * np.pi * np.log2(ranks + 0.5)))
    amplitude, slope = generator.normal(size=(2, REPLICATES, 1))
    noise = 0.05 * amplitude + 0.02 * slope * np.log(ranks)
    noise = noise + 0.05 * generator.normal(size=(REPLICATES, len(ranks)))
    return list(np.exp(curve + noise))


def measured_exponent(generator, exponent, correction, kind):
    """Value and total error of one injection, through the package's own chain."""
    by_size = []
    for size in SIZES:
        windows = [rule.at(size, 2) for rule in RULES]
        bins = bins_of_windows(windows, 12)
        vector = DataVector.of(bin_logs(synthetic_spectra(generator, size, exponent, correction, kind), bins))
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
    found = measure(extrapolate(estimates, (0.5, 0.75, 1.0), 2).limit, replicates)
    return found.value[0], found.total[0]


@pytest.fixture(scope="module", params=KINDS)
def pulls(request):
    """(value − truth) over the total error, one for each injection."""
    found = []
    for seed in range(INJECTIONS):
        generator = np.random.default_rng([seed, KINDS.index(request.param)])
        exponent, correction = generator.uniform(0.5, 1.2), generator.uniform(-0.8, 0.8)
        value, total = measured_exponent(generator, exponent, correction, request.param)
        found.append((value - exponent) / total)
    return np.array(found)


@pytest.mark.parametrize(("sigmas", "promised"), [(1.0, 0.683), (2.0, 0.954)])
def test_intervals_hold_the_truth_as_often_as_they_say(pulls, sigmas, promised):
    # Coverage of 100 injections has a binomial error of 4.7 % at 68 %, 2.1 % at 95 %; two of it may lack.
    covered = (np.abs(pulls) < sigmas).mean()
    error = sqrt(promised * (1 - promised) / INJECTIONS)
    assert covered > promised - 2 * error


def test_intervals_are_not_so_wide_that_they_say_nothing(pulls):
    # an error five times too large would cover everything
    assert np.sqrt((pulls**2).mean()) > 1 / 5


def test_the_value_is_not_biased_beyond_its_error(pulls):
    # a bias well inside the quoted error is what a systematic error is for; half of it is too much
    assert abs(pulls.mean()) < 0.5
