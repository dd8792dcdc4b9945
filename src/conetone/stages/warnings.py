"""What a reader should know before quoting an exponent, as sentences in its row."""

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np

FIRST_LOOK_SIZES = 5
LARGE_REDUCED_CHI2 = 3.0
LARGE_DEVIATION = 5.0
# Estimators, or windows, that differ by more than their errors.
LARGE_DISAGREEMENT = 2.0
# Unexplained scatter of log λ that a reader should know of.
LARGE_SCATTER = 0.03
# Ratios of neighbouring sizes that differ by more than this are not geometric.
UNEVEN_RATIOS = 1.5


def warnings_of(row: Mapping[str, Any], left_out: Sequence[int], caveat: str | None) -> list[str]:
    """Warnings about one row of the exponents table, worst first.

    `left_out` are sizes of the sweep that have no fit; `caveat` belongs to the expected exponent.
    """
    found = []
    if row["replicates_failed"]:
        attempted = row["replicates_attempted"]
        found.append(f"{row['replicates_failed']} of {attempted} replicates failed: see status in spectra/")
    if left_out:
        sizes = ", ".join(str(size) for size in left_out)
        found.append(f"sizes without a fit are left out: {sizes}; the reasons stand in fits.parquet")
    expected, error = row["ordering_fraction_expected"], row["ordering_fraction_error"]
    if expected is not None and error:
        deviation = abs(row["ordering_fraction"] - expected) / error
        if deviation > LARGE_DEVIATION:
            found.append(f"the ordering fraction is {deviation:.1f} σ from {expected:.4g}")
    if row["exponent"] is None:
        return found
    if caveat:
        found.append(caveat)
    if len(row["sizes"]) < FIRST_LOOK_SIZES:
        found.append(f"first look: {len(row['sizes'])} sizes, a published number needs {FIRST_LOOK_SIZES}")
    if row["scatter"] > LARGE_SCATTER:
        found.append(
            f"steps in the spectrum: up to {row['scatter']:.0%} off every model, beyond statistical error"
        )
    short, windows = row["windows_short"]
    if short:
        found.append(f"{short} of {windows} windows have no fit at the largest size and do not count")
    if row["other_deviation"] is not None and abs(row["other_deviation"]) > LARGE_DISAGREEMENT:
        other = (
            f"{row['other_exponent']:.3f} ± {np.hypot(row['other_statistical'], row['other_systematic']):.3f}"
        )
        found.append(f"the other estimator gives {other}, {abs(row['other_deviation']):.1f} σ away")
    found += row["dimension_sentences"]
    if row["reduced_chi2"] > LARGE_REDUCED_CHI2:
        found.append(f"the sizes follow no single power: χ²/ν = {row['reduced_chi2']:.1f}")
    ratios = [b / a for a, b in zip(row["sizes"][:-1], row["sizes"][1:], strict=True)]
    if max(ratios) > UNEVEN_RATIOS * min(ratios):
        found.append("the sizes are not geometric")
    return found
