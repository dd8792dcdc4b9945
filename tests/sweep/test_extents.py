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


# Sizes in ratios of √2, and then of two, with 0.7 n^0.5, the end of the widest window by default: by the
# smooth count, which is the default too, and by bins of rank.
BY_DEFAULT = {
    256: None, 362: None, 512: None, 724: None, 1024: None, 1448: None, 2048: None, 2896: 128, 4096: 152,
    5793: 176, 8192: 216, 16_384: 296, 32_768: 424, 65_536: 592, 131_072: 840,
}  # fmt: skip
BY_BINS = {
    256: None, 362: None, 512: None, 724: None, 1024: 24, 1448: 32, 2048: 40, 2896: 40, 4096: 48,
    5793: 64, 8192: 72, 16_384: 96, 32_768: 136, 65_536: 192, 131_072: 272,
}  # fmt: skip


@pytest.mark.parametrize(("estimator", "counts"), [("smooth-count", BY_DEFAULT), ("rank-bins", BY_BINS)])
def test_sizes_with_the_default_windows(estimator: str, counts: dict[int, int | None]) -> None:
    found = decided(list(counts), Growth(0.7, 0.5), estimator)
    assert {size: each.count for size, each in zip(counts, found, strict=True)} == counts


def test_windows_may_be_so_long_that_their_smooth_count_takes_everything() -> None:
    found = decided(list(BY_DEFAULT), Growth(0.35, 0.75), "smooth-count")
    assert {each.extent for each in found} == {"full"}
    assert found[0].why == "80 of each sign are too many: they take 736 elements"


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
