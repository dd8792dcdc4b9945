"""Log λ along a rank axis, in bins and at smooth ranks."""

from math import log

import numpy as np
import pytest

from conetone.fit.logs import RankedLogs, bin_logs, smooth_logs
from conetone.fit.smoothcount import SmoothRanks, log_cutoffs
from conetone.fit.windows import RankBins


def test_logs_are_averaged_over_bins():
    generator = np.random.default_rng(1)
    spectra = [np.sort(generator.random(length))[::-1] for length in (20, 25, 31)]
    bins = RankBins((2, 3, 7, 20))
    found = bin_logs(spectra, bins)
    assert found.values.shape == (3, 3)
    for replicate, spectrum in enumerate(spectra):
        for b, ranks in enumerate((range(2, 3), range(3, 7), range(7, 20))):
            plain = sum(log(spectrum[rank - 1]) for rank in ranks) / len(ranks)
            assert found.values[replicate, b] == pytest.approx(plain, rel=1e-12)
    np.testing.assert_allclose(found.mean, [sum(column) / 3 for column in found.values.T], rtol=1e-12)
    plain = [np.sqrt(sum((v - sum(c) / 3) ** 2 for v in c) / 2 / 3) for c in found.values.T]
    np.testing.assert_allclose(found.error, plain, rtol=1e-10)


@pytest.mark.parametrize("complete", [True, False])
def test_smooth_logs_are_the_cutoffs_of_each_replicate(complete):
    spectra = [2.0**i * np.arange(1.0, length) ** -0.7 for i, length in enumerate((60, 80, 25))]
    ranks = SmoothRanks((1.5, 4.0, 9.0, 20.0))
    found = smooth_logs(spectra, ranks, complete=complete)
    assert found.axis is ranks
    for row, spectrum in zip(found.values, spectra, strict=True):
        np.testing.assert_array_equal(row, log_cutoffs(spectrum, ranks.ranks, complete=complete))
    assert np.isnan(found.values[2, -1])  # 24 values are too few for rank 20
    assert np.isfinite(found.values[1]).all()


def test_logs_are_read_only():
    found = RankedLogs(RankBins((1, 2, 3)), np.zeros((2, 2)))
    with pytest.raises(ValueError, match="read-only"):
        found.values[0, 0] = 1
