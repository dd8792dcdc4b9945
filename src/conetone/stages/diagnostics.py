"""Rows of `diagnostics`: how an exponent depends on what its average goes over. None of them is quoted."""

from collections.abc import Sequence
from typing import Any

import numpy as np

from conetone.aggregate.collapse import Curve, best_collapse
from conetone.aggregate.resample import measure
from conetone.aggregate.scaling import (
    SMALLEST_NUMBER_OF_SIZES,
    Extrapolation,
    extrapolate,
    only_fitted,
    without_smallest,
)
from conetone.aggregate.sequence import extrapolate_sequence
from conetone.aggregate.series import SeriesExponent
from conetone.errors import InputError
from conetone.records.tables import Row
from conetone.sweep.settings import ExtrapolationSettings

# The ω of the profile: what the quality of a free fit would be, which is never quoted.
OMEGAS = tuple(round(0.1 * i, 1) for i in range(2, 21))
# The powers of n that ranks are divided by.
POWERS = np.linspace(0.3, 1.2, 37)


def diagnostic_rows(
    keys: dict[str, Any],
    result: SeriesExponent | None,
    settings: ExtrapolationSettings,
    profiles: list[dict[str, Any]],
) -> list[Row]:
    """α∞ against the smallest size used and a single ω, the collapse of local slopes, the sequence."""
    rows = _collapse_rows(keys, profiles)
    if result is None or result.found is None:
        return rows
    rows += _sequence_rows(keys, result)
    estimates = only_fitted(result.estimates)
    for count in range(len(result.fitted_sizes) - SMALLEST_NUMBER_OF_SIZES + 1):
        smallest = result.fitted_sizes[count]
        kept = without_smallest(estimates, count)
        found = extrapolate(kept, settings.omegas, 0)
        if found:
            rows.append(_row(keys, "smallest-size", smallest, found, result.replicates))
    for omega in OMEGAS:
        found = extrapolate(estimates, [omega], settings.most_sizes_cut)
        if found:
            rows.append(_row(keys, "omega", omega, found, result.replicates))
    return rows


def _collapse_rows(keys: dict[str, Any], profiles: list[dict[str, Any]]) -> list[Row]:
    """Quality of the collapse of local slopes against rank/n^power; none of exactly regular orders."""
    by_size: dict[int, list[dict[str, Any]]] = {}
    for row in profiles:
        if row["slope"] is not None and row["slope_error"]:
            by_size.setdefault(row["size"], []).append(row)
    curves = {
        size: Curve(
            *(np.array([row[name] for row in rows]) for name in ("slope_rank", "slope", "slope_error"))
        )
        for size, rows in by_size.items()
    }
    if len(curves) < 2:
        return []
    found = best_collapse(curves, POWERS)
    numbers = ("exponent", "statistical", "systematic")
    return [
        {**keys, "kind": "collapse", "abscissa": float(p), **dict.fromkeys(numbers), "quality": float(s)}
        for p, s in zip(found.powers, found.quality, strict=True)
        if np.isfinite(s)
    ]


def _sequence_rows(keys: dict[str, Any], result: SeriesExponent) -> list[Row]:
    """Rational extrapolation of the averages at each size; only of numbers without noise."""
    at = result.at_sizes
    known = np.isfinite(at.value)
    sizes, values = np.array(result.sizes, dtype=np.float64)[known], at.value[known]
    try:
        found = extrapolate_sequence(1 / sizes, values, 1.0, at.statistical[known])
    except InputError:  # noisy, or too short
        return []
    limit = {"exponent": found.value, "statistical": 0.0, "systematic": found.error, "quality": None}
    return [{**keys, "kind": "sequence", "abscissa": 1.0, **limit}]


def _row(
    keys: dict[str, Any], kind: str, abscissa: float, found: Extrapolation, replicates: Sequence[int]
) -> Row:
    limit = measure(found.limit, replicates)
    return {
        **keys,
        "kind": kind,
        "abscissa": float(abscissa),
        "exponent": float(limit.value[0]),
        "statistical": float(limit.statistical[0]),
        "systematic": float(limit.systematic[0]),
        "quality": found.reduced_chi2,
    }
