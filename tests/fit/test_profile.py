"""Profiles: a whole spectrum in bins, and its local slope."""

from itertools import pairwise
from math import exp, log

import numpy as np
import pytest

from conetone.fit.profile import profile
from conetone.fit.windows import bins_of_spectrum


def test_the_slope_of_a_power_law_is_its_exponent():
    ranks = np.arange(1, 301)
    spectra = [amplitude * ranks**-0.75 for amplitude in (0.5, 1.0, 2.0)]
    found = profile(spectra, 20)
    np.testing.assert_allclose(found.slope[:-1], 0.75, rtol=1e-11)
    assert found.slope_error[:-1].max() < 1e-12
    np.testing.assert_allclose(found.log_magnitude, -0.75 * np.log(found.rank), atol=1e-12)
    # amplitudes 1/2, 1, 2: standard deviation log 2, over √3
    np.testing.assert_allclose(found.log_magnitude_error, log(2) / 3**0.5, rtol=1e-11)


def test_against_loops():
    generator = np.random.default_rng(1)
    spectra = [np.sort(generator.random(length))[::-1] for length in (50, 60, 47, 80)]
    found = profile(spectra, 9)
    edges = bins_of_spectrum(47, 9).edges
    bins = [range(low, high) for low, high in pairwise(edges)]
    log_ranks = [sum(log(r) for r in ranks) / len(ranks) for ranks in bins]
    logs = [[sum(log(s[r - 1]) for r in ranks) / len(ranks) for ranks in bins] for s in spectra]
    for b in range(len(bins)):
        column = [row[b] for row in logs]
        assert found.rank[b] == pytest.approx(exp(log_ranks[b]), rel=1e-12)
        assert found.log_magnitude[b] == pytest.approx(np.mean(column), rel=1e-12)
        assert found.log_magnitude_error[b] == pytest.approx(np.std(column, ddof=1) / 2, rel=1e-10)
        if b + 1 == len(bins):
            continue
        step = log_ranks[b + 1] - log_ranks[b]
        slopes = [-(row[b + 1] - row[b]) / step for row in logs]
        assert found.slope[b] == pytest.approx(np.mean(slopes), rel=1e-10)
        assert found.slope_error[b] == pytest.approx(np.std(slopes, ddof=1) / 2, rel=1e-10)
        assert found.slope_rank[b] == pytest.approx(exp((log_ranks[b] + log_ranks[b + 1]) / 2), rel=1e-12)
    assert [np.isnan(values[-1]) for values in (found.slope, found.slope_error, found.slope_rank)] == [
        True
    ] * 3
