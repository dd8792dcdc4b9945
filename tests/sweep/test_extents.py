"""What `extent: auto` decides, number by number: what decides otherwise computes existing sweeps anew."""

from typing import Any

import pytest

from conetone.fit.windows import Growth, WindowRule
from conetone.sweep.extents import resolve_spectra
from conetone.sweep.fields import SpectrumFields
from conetone.sweep.settings import SpectrumSettings, WindowSettings


def decided(sizes: list[int], end: Growth, **fields: Any) -> tuple[SpectrumSettings, ...]:
    windows = WindowSettings((WindowRule(Growth(0.25, 0.5), end),), 2, 12, ("power",))
    return resolve_spectra(SpectrumFields(extent="auto", **fields), sizes, windows)


# Sizes in ratios of √2, and then of two, with 0.35 n^0.75, the end of the widest window by default.
BY_DEFAULT = {
    256: None, 362: None, 512: None, 724: None, 1024: None, 1448: None, 2048: None, 2896: 152, 4096: 192,
    5793: 248, 8192: 320, 16_384: 544, 32_768: 912, 65_536: 1528, 131_072: 2568,
}  # fmt: skip


def test_sizes_with_the_default_windows() -> None:
    found = decided(list(BY_DEFAULT), Growth(0.35, 0.75))
    assert {size: each.count for size, each in zip(BY_DEFAULT, found, strict=True)} == BY_DEFAULT


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
