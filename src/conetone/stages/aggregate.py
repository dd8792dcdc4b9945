"""Stage aggregate: extrapolate every series, and collect the tables of the whole sweep."""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from conetone.aggregate.resample import Candidate, Measured, measure, stack_copies
from conetone.aggregate.scaling import (
    SMALLEST_NUMBER_OF_SIZES,
    Extrapolation,
    average_at_sizes,
    extrapolate,
)
from conetone.fit.models import MODELS
from conetone.fit.powerlaw import Estimates
from conetone.records.files import inputs_digest, read_rows
from conetone.records.tables import SERIES_KEYS, Row
from conetone.reference.exponents import ExpectedExponent, expected_exponent
from conetone.sprinkle.catalogue import ENSEMBLES, PARAMETER_NAMES
from conetone.stages.warnings import warnings_of
from conetone.stages.whole import taken_up, write_all
from conetone.sweep.paths import CLOSING_TABLES, PIECE_TABLES, closing_path, piece_path
from conetone.sweep.requests import AggregateRequest
from conetone.sweep.settings import ExtrapolationSettings

# Points of an extrapolation curve, evenly spaced in n^−ω.
CURVE_POINTS = 41


def aggregate_sweep(request: AggregateRequest) -> None:
    """Read the pieces of every series; write the closing tables."""
    pieces = [piece_path(name, table) for name in request.series for table in PIECE_TABLES]
    outputs = {table: closing_path(table) for table in CLOSING_TABLES}
    inputs = inputs_digest(pieces)
    if taken_up(outputs, request.text(), inputs):
        return
    tables: dict[str, list[Row]] = {table: [] for table in CLOSING_TABLES}
    for name in request.series:
        tables["bins"] += read_rows(piece_path(name, "bins"))
        tables["profiles"] += read_rows(piece_path(name, "profiles"))
        for table, rows in _series_tables(read_rows(piece_path(name, "fits")), request.extrapolation).items():
            tables[table] += rows
    write_all(outputs, tables, request.text(), inputs)


@dataclass(frozen=True)
class _Series:
    """The fits of one series, by size and candidate; `sizes` are those with at least one fit."""

    fits: list[dict[str, Any]]
    sizes: list[int]
    replicates: dict[int, list[int]]
    candidates: list[tuple[str, str]]

    def keys(self) -> dict[str, Any]:
        return {column.name: self.fits[0][column.name] for column in SERIES_KEYS}

    def of_size(self, size: int) -> dict[str, Any]:
        """Any fit of that size, for the columns they share."""
        return next(fit for fit in self.fits if fit["size"] == size)


def _collect(fits: list[dict[str, Any]]) -> _Series:
    return _Series(
        fits,
        sorted({fit["size"] for fit in fits if fit["status"] == "ok"}),
        {fit["size"]: fit["copies_replicate"] for fit in fits},
        list(dict.fromkeys((fit["window"], fit["model"]) for fit in fits)),
    )


def _series_tables(fits: list[dict[str, Any]], settings: ExtrapolationSettings) -> dict[str, list[Row]]:
    series = _collect(fits)
    if not series.sizes:
        return {
            "fits": list(fits),
            "exponents": [_exponent_row(series, settings, None, None, "no size has a fit: see fits.parquet")],
        }
    replicates = [len(series.replicates[size]) for size in series.sizes]
    estimates = stack_copies(series.sizes, replicates, [_candidate(series, c) for c in series.candidates])
    found = extrapolate(estimates, settings.omegas, settings.most_sizes_cut)
    if found is None:
        averages = measure(average_at_sizes(estimates), replicates)
        reason = f"{len(series.sizes)} usable sizes; extrapolation takes {SMALLEST_NUMBER_OF_SIZES}"
        if len(series.sizes) >= SMALLEST_NUMBER_OF_SIZES:
            reason = f"no window has fits at {SMALLEST_NUMBER_OF_SIZES} sizes, the largest among them"
        row = _exponent_row(series, settings, None, None, reason)
        return {"fits": [*fits, *_average_rows(series, averages, replicates)], "exponents": [row]}
    omega = settings.omegas[int(found.omega_weights.argmax())]
    curve = _curve_sizes(series.sizes, omega)
    weights = dict(zip(series.candidates, found.weights, strict=True))
    for fit in fits:
        fit["weight"] = float(weights[fit["window"], fit["model"]]) if fit["status"] == "ok" else None
    averages = measure(found.at_sizes, replicates)
    limit = measure(found.limit, replicates)
    return {
        "fits": [*fits, *_average_rows(series, averages, replicates)],
        "exponents": [_exponent_row(series, settings, found, limit, None)],
        "extrapolations": _curve_rows(series, omega, curve, measure(found.at(curve), replicates)),
    }


def _candidate(series: _Series, candidate: tuple[str, str]) -> Candidate:
    by_size = {
        fit["size"]: fit
        for fit in series.fits
        if (fit["window"], fit["model"]) == candidate and fit["status"] == "ok"
    }
    return Candidate(
        MODELS[candidate[1]].parameters,
        [_estimates(by_size[size]) if size in by_size else None for size in series.sizes],
        [by_size[size]["bins_cut"] if size in by_size else 0 for size in series.sizes],
    )


def _estimates(fit: dict[str, Any]) -> Estimates:
    def joined(value: str, copies: str) -> Any:
        return np.array([fit[value], *fit[copies]])

    return Estimates(
        joined("exponent", "copies"),
        joined("statistical", "statistical_copies"),
        joined("misfit", "misfit_copies"),
        joined("chi2", "chi2_copies"),
    )


def _curve_sizes(sizes: Sequence[int], omega: float) -> Any:
    abscissa = np.linspace(0, sizes[0] ** -omega * 1.05, CURVE_POINTS)
    with np.errstate(divide="ignore"):
        return abscissa ** (-1 / omega)


def _average_rows(series: _Series, averages: Measured, replicates: Sequence[int]) -> list[Row]:
    rows: list[Row] = []
    first = 0
    for s, (size, count) in enumerate(zip(series.sizes, replicates, strict=True)):
        template = series.of_size(size)
        known = bool(np.isfinite(averages.value[s]))
        reason = "no candidate of this size has a fit at the largest size, which weights need"
        rows.append(
            {
                **template,
                "window": "average",
                "model": "average",
                "exponent": float(averages.value[s]) if known else None,
                "statistical": float(averages.statistical[s]) if known else None,
                "misfit": float(averages.systematic[s]) if known else None,
                "copies": averages.copies[first : first + count, s] if known else None,
                "weight": None,
                **dict.fromkeys(
                    (
                        "chi2",
                        "degrees",
                        "bins_cut",
                        "parameters",
                        "statistical_copies",
                        "misfit_copies",
                        "chi2_copies",
                    )
                ),
                "status": "ok" if known else "failed",
                "reason": None if known else reason,
            }
        )
        first += count
    return rows


def _curve_rows(series: _Series, omega: float, sizes: Any, curve: Measured) -> list[Row]:
    return [
        {
            **series.keys(),
            "size": float(size),
            "omega": omega,
            "exponent": float(curve.value[i]),
            "statistical": float(curve.statistical[i]),
            "systematic": float(curve.systematic[i]),
        }
        for i, size in enumerate(sizes)
    ]


def _exponent_row(
    series: _Series,
    settings: ExtrapolationSettings,
    found: Extrapolation | None,
    limit: Measured | None,
    reason: str | None,
) -> Row:
    keys = series.keys()
    expected = _expected(keys)
    largest = series.of_size(series.sizes[-1]) if series.sizes else series.fits[-1]
    by_size = {fit["size"]: fit for fit in series.fits}
    row: dict[str, Any] = {
        **keys,
        "exponent": float(limit.value[0]) if limit else None,
        "statistical": float(limit.statistical[0]) if limit else None,
        "systematic": float(limit.systematic[0]) if limit else None,
        "reduced_chi2": found.reduced_chi2 if found else None,
        "scatter": max((by_size[size]["scatter"] for size in series.sizes), default=None),
        "sizes": series.sizes,
        "replicates_used": sum(by_size[size]["replicates_used"] for size in series.sizes),
        "replicates_failed": sum(fit["replicates_failed"] for fit in by_size.values()),
        "replicates_attempted": sum(fit["replicates_attempted"] for fit in by_size.values()),
        "expected": expected.value if expected else None,
        "expected_standing": expected.standing if expected else None,
        "expected_source": expected.source if expected else None,
        "deviation": (float(limit.value[0]) - expected.value) / float(limit.total[0])
        if limit and expected
        else None,
        "ordering_fraction": largest["ordering_fraction"],
        "ordering_fraction_error": largest["ordering_fraction_error"],
        "ordering_fraction_expected": _expected_ordering_fraction(keys),
        "omegas": list(settings.omegas),
        "omega_weights": found.omega_weights if found else None,
        "copies": limit.copies[:, 0] if limit else None,
        "copies_size": [size for size in series.sizes for _ in series.replicates[size]],
        "copies_replicate": [replicate for size in series.sizes for replicate in series.replicates[size]],
        "status": "failed" if reason else "ok",
        "reason": reason,
    }
    left_out = [size for size in by_size if size not in series.sizes]
    return {**row, "warnings": warnings_of(row, left_out, expected.caveat if expected else None)}


def _expected(keys: dict[str, Any]) -> ExpectedExponent | None:
    region = ENSEMBLES[keys["ensemble"]].region
    return expected_exponent(keys["matrix"], keys["part"], region, keys["dimension"])


def _expected_ordering_fraction(keys: dict[str, Any]) -> float | None:
    known = ENSEMBLES[keys["ensemble"]].ordering_fraction
    given = {name: keys[name] for name in PARAMETER_NAMES if keys[name] is not None}
    return known(given) if known else None
