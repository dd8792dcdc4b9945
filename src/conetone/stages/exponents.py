"""Rows of `exponents` and `differences`: one series each, and what follows from several."""

from collections.abc import Mapping, Sequence
from itertools import combinations
from typing import Any

import numpy as np

from conetone.aggregate.curves import ExpectedCurve, ExponentCurve, MeasuredCurve
from conetone.aggregate.derived import Ingredient, derive
from conetone.aggregate.dimension import (
    SpectralDimension,
    disagreement,
    myrheim_meyer_dimension,
    spectral_dimension,
)
from conetone.aggregate.resample import Measured
from conetone.aggregate.series import SeriesExponent, deviation_between
from conetone.fit.logs import Estimator
from conetone.records.tables import SERIES_KEYS, Row
from conetone.reference.exponents import ExpectedExponent, expected_exponent
from conetone.sprinkle.catalogue import ENSEMBLES, PARAMETER_NAMES
from conetone.stages.warnings import warnings_of
from conetone.sweep.requests import AggregateRequest

Results = Mapping[Estimator, SeriesExponent | None]


def exponent_row(fits: list[dict[str, Any]], request: AggregateRequest, results: Results) -> dict[str, Any]:
    """The row of one series; dimensions and warnings, which need the other series too, still missing."""
    keys = {column.name: fits[0][column.name] for column in SERIES_KEYS}
    expected = expected_of(keys)
    quoted = results[request.estimator]
    limit = quoted.limit if quoted else None
    sizes = quoted.fitted_sizes if quoted else ()
    by_size = {fit["size"]: fit for fit in fits if fit["estimator"] == request.estimator}
    largest = by_size[sizes[-1]] if sizes else fits[-1]
    reason = quoted.reason if quoted else "no size has a fit: see fits.parquet"
    return {
        **keys,
        **_limit_columns("", limit),
        "estimator": request.estimator,
        **_other_columns(request.estimator, results),
        **_scaling_columns(quoted, fits, request.estimator),
        "scatter": max((by_size[size]["scatter"] for size in sizes), default=None),
        "sizes": list(sizes),
        "replicates_used": sum(by_size[size]["replicates_used"] for size in sizes),
        "replicates_failed": sum(fit["replicates_failed"] for fit in by_size.values()),
        "replicates_attempted": sum(fit["replicates_attempted"] for fit in by_size.values()),
        "expected": expected.value if expected else None,
        "expected_standing": expected.standing if expected else None,
        "expected_source": expected.source if expected else None,
        "deviation": (float(limit.value[0]) - expected.value) / float(limit.total[0])
        if limit and expected and limit.total[0] > 0
        else None,
        "ordering_fraction": largest["ordering_fraction"],
        "ordering_fraction_error": largest["ordering_fraction_error"],
        "ordering_fraction_expected": _expected_ordering_fraction(keys),
        "omegas": list(request.extrapolation.omegas),
        "copies": limit.copies[:, 0] if limit else None,
        "copies_size": _copies_size(quoted),
        "copies_replicate": [r for s in (quoted.sizes if quoted else ()) for r in _replicates(fits, s)],
        "status": "failed" if reason else "ok",
        "reason": reason,
        "left_out": [size for size in by_size if size not in sizes],
        "windows_short": _windows_short(fits, request.estimator, sizes),
    }


def _windows_short(fits: list[dict[str, Any]], estimator: Estimator, sizes: Sequence[int]) -> tuple[int, int]:
    """How many windows with fits have none at the largest size, which weights need, and of how many."""
    mine = [fit for fit in fits if fit["estimator"] == estimator and fit["status"] == "ok"]
    fitted = {fit["window"] for fit in mine}
    reaching = {fit["window"] for fit in mine if fit["size"] == max(sizes, default=0)}
    return len(fitted - reaching), len(fitted)


def _limit_columns(prefix: str, limit: Measured | None) -> dict[str, Any]:
    names = ("exponent", "statistical", "systematic")
    values = (limit.value, limit.statistical, limit.systematic) if limit else None
    return {f"{prefix}{name}": float(values[i][0]) if values else None for i, name in enumerate(names)}


def _other_columns(estimator: Estimator, results: Results) -> dict[str, Any]:
    other = next(result for name, result in results.items() if name != estimator)
    quoted = results[estimator]
    known = quoted and other and quoted.limit and other.limit
    return {
        **_limit_columns("other_", other.limit if other else None),
        "other_deviation": deviation_between(quoted.limit, other.limit, quoted.replicates)
        if known and quoted and other and quoted.limit and other.limit
        else None,
    }


def _scaling_columns(
    quoted: SeriesExponent | None, fits: list[dict[str, Any]], estimator: Estimator
) -> dict[str, Any]:
    found = quoted.found if quoted else None
    if found is None:
        names = ("reduced_chi2", "two_terms", "omega_weights", "window_weights", "window_models")
        return dict.fromkeys(names)
    mine = [fit for fit in fits if fit["estimator"] == estimator]
    labels = [
        f"{window}: {model}" for window, model in dict.fromkeys((f["window"], f["model"]) for f in mine)
    ]
    heaviest = sorted(zip(found.weights.tolist(), labels, strict=True), reverse=True)
    return {
        "reduced_chi2": found.reduced_chi2,
        "two_terms": found.two_terms,
        "omega_weights": found.omega_weights,
        "window_weights": [weight for weight, _ in heaviest],
        "window_models": [label for _, label in heaviest],
    }


def _copies_size(quoted: SeriesExponent | None) -> list[int]:
    if quoted is None:
        return []
    return [s for s, count in zip(quoted.sizes, quoted.replicates, strict=True) for _ in range(count)]


def _replicates(fits: list[dict[str, Any]], size: int) -> list[int]:
    return next(list(fit["copies_replicate"]) for fit in fits if fit["size"] == size)


def expected_of(keys: Mapping[str, Any]) -> ExpectedExponent | None:
    """The exponent that theory expects for a series, given its key columns."""
    region = ENSEMBLES[keys["ensemble"]].region
    return expected_exponent(keys["matrix"], keys["part"], region, keys["dimension"])


def _expected_ordering_fraction(keys: Mapping[str, Any]) -> float | None:
    known = ENSEMBLES[keys["ensemble"]].ordering_fraction
    given = {name: keys[name] for name in PARAMETER_NAMES if keys[name] is not None}
    return known(given) if known else None


def add_dimensions(rows: list[dict[str, Any]]) -> None:
    """Add the dimension of each exponent and of its ordering fraction, and what parts them.

    The measured curve of an operator goes through the flat diamonds of the sweep, without the series itself.
    """
    for row in rows:
        ordering = None
        # the formula is that of diamonds; orders that resemble no region are asked all the same
        if row["ordering_fraction"] is not None and ENSEMBLES[row["ensemble"]].region in (None, "diamond"):
            ordering = myrheim_meyer_dimension(row["ordering_fraction"], row["ordering_fraction_error"])
        expected = _spectral(row, ExpectedCurve())
        measured = _spectral(row, _measured_curve(row, rows))
        apart = disagreement(expected, ordering) if expected and ordering else None
        row.update(
            {
                **_interval("spectral_dimension", expected),
                **_interval("measured_dimension", measured),
                "myrheim_meyer_dimension": ordering.value if ordering else None,
                "myrheim_meyer_error": ordering.error if ordering else None,
                "dimension_deviation": apart.deviation if apart else None,
            }
        )
        sentences = [each.sentence for each in (expected, ordering, apart) if each]
        row["dimension_sentences"] = [sentence for sentence in sentences if sentence]


def _spectral(row: Mapping[str, Any], curve: ExponentCurve | None) -> SpectralDimension | None:
    if curve is None or row["exponent"] is None or row["matrix"] != "causal":
        return None
    sizes, copies = np.array(row["copies_size"]), np.asarray(row["copies"])
    by_size = [copies[sizes == size] for size in dict.fromkeys(row["copies_size"])]
    return spectral_dimension(row["exponent"], row["statistical"], row["systematic"], by_size, curve)


def _measured_curve(row: Mapping[str, Any], rows: list[dict[str, Any]]) -> MeasuredCurve | None:
    nodes = [
        other
        for other in rows
        if other is not row
        and other["exponent"] is not None
        and ENSEMBLES[other["ensemble"]].region == "diamond"
        and (other["matrix"], other["part"]) == (row["matrix"], row["part"])
    ]
    errors = [float(np.hypot(node["statistical"], node["systematic"])) for node in nodes]
    return MeasuredCurve.through(
        [node["dimension"] for node in nodes], [node["exponent"] for node in nodes], errors
    )


def _interval(name: str, found: SpectralDimension | None) -> dict[str, float | None]:
    return {
        name: found.value if found else None,
        f"{name}_low": found.low if found else None,
        f"{name}_high": found.high if found else None,
    }


def add_warnings(rows: list[dict[str, Any]]) -> None:
    """Add to every row what a reader should know."""
    for row in rows:
        expected = expected_of(row)
        row["warnings"] = warnings_of(row, row.pop("left_out"), expected.caveat if expected else None)
        del row["dimension_sentences"], row["windows_short"]


def difference_rows(rows: list[dict[str, Any]]) -> list[Row]:
    """Every pair of series of a sweep that have exponents; series of one ensemble share their orders."""
    measured = [row for row in rows if row["status"] == "ok"]
    found: list[Row] = []
    for one, other in combinations(measured, 2):
        pair = [_ingredient(one), _ingredient(other)]
        difference = derive(lambda a, b: a - b, pair)
        ratio = derive(lambda a, b: a / b if b else float("nan"), pair)
        found.append(
            {
                **{column.name: one[column.name] for column in SERIES_KEYS},
                **{f"other_{column.name}": other[column.name] for column in SERIES_KEYS},
                "difference": difference.value,
                "statistical": difference.statistical,
                "systematic": difference.systematic,
                "deviation": difference.value / difference.total if difference.total > 0 else 0.0,
                "ratio": ratio.value,
                "ratio_statistical": ratio.statistical,
                "ratio_systematic": ratio.systematic,
            }
        )
    return found


def _ingredient(row: Mapping[str, Any]) -> Ingredient:
    names = [column.name for column in SERIES_KEYS if column.name not in ("series", "matrix", "part")]
    ensemble = repr([row[name] for name in names])
    sizes, replicates = row["copies_size"], row["copies_replicate"]
    orders = [(f"{ensemble} {size}", replicate) for size, replicate in zip(sizes, replicates, strict=True)]
    return Ingredient(row["exponent"], row["systematic"], row["copies"], orders)
