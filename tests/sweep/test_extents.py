"""What `extent: auto` decides, number by number: what decides otherwise computes existing sweeps anew."""

from typing import Any

import numpy as np
import pytest

from conetone.fit.size import WindowSettings
from conetone.fit.smoothcount import log_cutoffs
from conetone.fit.windows import Growth, WindowRule
from conetone.sweep.extents import ranks_needed, resolve_spectra
from conetone.sweep.fields import SpectrumFields
from conetone.sweep.settings import SpectrumSettings


def decided(
    sizes: list[int], end: Growth, estimator: Any = "rank-bins", **fields: Any
) -> tuple[SpectrumSettings, ...]:
    windows = WindowSettings((WindowRule(Growth(0.25, 0.5), end),), 2, 12, ("power",), estimator)
    return resolve_spectra(SpectrumFields(extent="auto", **fields), sizes, windows)


# Sizes in ratios of √2, and then of two, with 0.35 n^0.75, the end of the widest window by default. Its smooth
# count takes so many ranks that a full spectrum is always quicker.
BY_DEFAULT = {
    256: None, 362: None, 512: None, 724: None, 1024: None, 1448: None, 2048: None, 2896: 152, 4096: 192,
    5793: 248, 8192: 320, 16_384: 544, 32_768: 912, 65_536: 1528, 131_072: 2568,
}  # fmt: skip
# The same with windows that end at 0.35 n^0.6.
SHORTER = {
    256: None, 362: None, 512: None, 724: None, 1024: None, 1448: None, 2048: None, 2896: 144, 4096: 176,
    5793: 216, 8192: 264, 16_384: 392, 32_768: 592, 65_536: 904, 131_072: 1360,
}  # fmt: skip


@pytest.mark.parametrize(
    ("estimator", "power", "counts"),
    [
        ("rank-bins", 0.75, BY_DEFAULT),
        ("smooth-count", 0.75, dict.fromkeys(BY_DEFAULT)),
        ("smooth-count", 0.6, SHORTER),
    ],
)
def test_sizes_with_the_same_windows(estimator: str, power: float, counts: dict[int, int | None]) -> None:
    found = decided(list(counts), Growth(0.35, power), estimator)
    assert {size: each.count for size, each in zip(counts, found, strict=True)} == counts


@pytest.mark.parametrize(
    ("count", "solver", "first"),
    [
        (10, "auto", 699),
        (25, "auto", 786),
        (50, "auto", 1037),
        (100, "auto", 2006),
        (200, "auto", 3725),
        (400, "auto", 7219),
        (50, "lapack", 786),
        (400, "lapack", 4571),
    ],
)
def test_the_first_size_at_which_leading_is_taken_to_be_quicker(count: int, solver: Any, first: int) -> None:
    sizes = [first // 2, first - 1, first, 2 * first]
    found = decided(sizes, Growth(2.0, 0.1), count=count, solver=solver)
    assert [each.extent for each in found] == ["full", "full", "leading", "leading"]
    assert [each.count for each in found] == [None, None, count, count]


def test_a_longer_window_asks_for_the_same_number_up_to_a_step() -> None:
    """45 ranks are 47.8 with the margin, 46 are 48.9; the rank at which a window ends is not in it."""
    for ranks, count in ((44, 48), (45, 48), (46, 56)):
        (found,) = decided([8192], Growth((ranks + 0.5) / 8192**0.5, 0.5))
        assert found.count == count


def test_a_smooth_count_takes_ranks_beyond_its_windows() -> None:
    """3.3 times as many, in eights, where nothing is said; three times as many are not refused."""
    for ranks, count in ((43.6, 144), (43.7, 152), (48.4, 160), (48.6, 168)):
        (found,) = decided([8192], Growth(ranks / 8192**0.5, 0.5), "smooth-count")
        assert found.count == count
    for count, extent in ((131, "full"), (132, "leading")):
        (found,) = decided([8192], Growth(43.9 / 8192**0.5, 0.5), "smooth-count", count=count)
        assert found.extent == extent


@pytest.mark.parametrize("exponent", [0.69, 0.75, 1.0, 1.3])
def test_the_fewest_eigenvalues_reach_the_end_of_the_window(exponent: float) -> None:
    """Of a pure power law, whose smooth counts need no other truth; 0.69 is where the bound is sharp."""
    for end in (20.0, 50.0, 200.0):
        windows = WindowSettings((WindowRule(Growth(0.1, 1), Growth(end / 4096, 1)),), 2, 12, ("power",))
        count = ranks_needed(windows, 4096)
        spectrum = np.arange(1.0, count + 1) ** -exponent
        assert np.isfinite(log_cutoffs(spectrum, np.array([2.0, end]), complete=False)).all()
        shorter = spectrum[: round(count * (0.97 if exponent == 0.69 else 0.5))]
        assert np.isnan(log_cutoffs(shorter, np.array([2.0, end]), complete=False)[1])
