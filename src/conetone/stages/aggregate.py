"""Stage aggregate: extrapolate every series, and collect the tables of the whole sweep."""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from conetone.aggregate.resample import Candidate, Measured
from conetone.aggregate.series import SeriesExponent, series_exponent
from conetone.fit.logs import Estimator
from conetone.fit.models import MODELS
from conetone.fit.powerlaw import Estimates
from conetone.fit.size import ESTIMATORS
from conetone.fit.windows import WindowRule
from conetone.records.files import inputs_digest, read_rows
from conetone.records.tables import SERIES_KEYS, Row
from conetone.stages.amplitudes import amplitude_rows
from conetone.stages.diagnostics import diagnostic_rows
from conetone.stages.exponents import add_dimensions, add_warnings, difference_rows, exponent_row
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
    exponents: list[dict[str, Any]] = []
    for name in request.series:
        for table in ("bins", "profiles"):
            tables[table] += read_rows(piece_path(name, table))
        series = SeriesRows(read_rows(piece_path(name, "fits")), read_rows(piece_path(name, "cutoffs")))
        results = {estimator: series.exponent(estimator, request.extrapolation) for estimator in ESTIMATORS}
        quoted = results[request.estimator]
        exponents.append(exponent_row(series.fits, request, results))
        tables["fits"] += series.weighted_fits(results, request.estimator)
        tables["extrapolations"] += _curve_rows(series.keys, quoted, request.extrapolation)
        tables["amplitudes"] += amplitude_rows(
            series.keys, series.cutoffs, request.extrapolation.most_sizes_cut
        )
        tables["diagnostics"] += diagnostic_rows(
            series.keys, quoted, request.extrapolation, read_rows(piece_path(name, "profiles"))
        )
    add_dimensions(exponents)
    add_warnings(exponents)
    tables["exponents"] += exponents
    tables["differences"] += difference_rows(exponents)
    write_all(outputs, tables, request.text(), inputs)


@dataclass(frozen=True)
class SeriesRows:
    """The pieces of one series: rows of `fits` and `cutoffs`."""

    fits: list[dict[str, Any]]
    cutoffs: list[dict[str, Any]]

    @property
    def keys(self) -> dict[str, Any]:
        """The key columns of the series."""
        return {column.name: self.fits[0][column.name] for column in SERIES_KEYS}

    @property
    def sizes(self) -> list[int]:
        """Sizes at which either estimator has a fit: copies of both are laid out over them."""
        return sorted({fit["size"] for fit in self.fits if fit["status"] == "ok"})

    def of_size(self, size: int) -> dict[str, Any]:
        """Any fit of that size, for the columns they share."""
        return next(fit for fit in self.fits if fit["size"] == size)

    def exponent(self, estimator: Estimator, settings: ExtrapolationSettings) -> SeriesExponent | None:
        """The series by one estimator; None if that has no fit at any size."""
        mine = [fit for fit in self.fits if fit["estimator"] == estimator]
        if not any(fit["status"] == "ok" for fit in mine):
            return None
        names = list(dict.fromkeys((fit["window"], fit["model"]) for fit in mine))
        replicates = [len(self.of_size(size)["copies_replicate"]) for size in self.sizes]
        candidates = [_candidate(mine, name, self.sizes) for name in names]
        return series_exponent(self.sizes, replicates, candidates, settings.omegas, settings.most_sizes_cut)

    def weighted_fits(self, results: dict[Estimator, SeriesExponent | None], quoted: Estimator) -> list[Row]:
        """The fits with their weights, and the averages of the quoted estimator at each size."""
        for estimator, result in results.items():
            mine = [fit for fit in self.fits if fit["estimator"] == estimator]
            if result is None or result.found is None:
                continue
            names = list(dict.fromkeys((fit["window"], fit["model"]) for fit in mine))
            weights = dict(zip(names, result.found.weights, strict=True))
            for fit in mine:
                if fit["status"] == "ok":
                    fit["weight"] = float(weights[fit["window"], fit["model"]])
        result = results[quoted]
        return [*self.fits, *(self._average_rows(result, quoted) if result else [])]

    def _average_rows(self, result: SeriesExponent, estimator: Estimator) -> list[Row]:
        averages, first = result.at_sizes, 0
        rows: list[Row] = []
        for s, (size, count) in enumerate(zip(result.sizes, result.replicates, strict=True)):
            if size in result.fitted_sizes:
                mine = (fit for fit in self.fits if (fit["size"], fit["estimator"]) == (size, estimator))
                rows.append(_average_row(next(mine), averages, s, slice(first, first + count)))
            first += count
        return rows


def _average_row(template: Row, averages: Measured, s: int, copies: slice) -> Row:
    known = bool(np.isfinite(averages.value[s]))
    reason = "no candidate of this size has a fit at the largest size, which weights need"
    of_one_fit = (
        "chi2", "degrees", "bins_cut", "parameters", "statistical_copies", "misfit_copies", "chi2_copies",
        "weight",
    )  # fmt: skip
    return {
        **template,
        **dict.fromkeys(of_one_fit),
        "window": "average",
        "model": "average",
        "exponent": float(averages.value[s]) if known else None,
        "statistical": float(averages.statistical[s]) if known else None,
        "misfit": float(averages.systematic[s]) if known else None,
        "copies": averages.copies[copies, s] if known else None,
        "status": "ok" if known else "failed",
        "reason": None if known else reason,
    }


def _candidate(fits: list[dict[str, Any]], name: tuple[str, str], sizes: Sequence[int]) -> Candidate:
    by_size = {
        fit["size"]: fit for fit in fits if (fit["window"], fit["model"]) == name and fit["status"] == "ok"
    }
    return Candidate(
        MODELS[name[1]].parameters,
        [_estimates(by_size[size]) if size in by_size else None for size in sizes],
        [by_size[size]["bins_cut"] if size in by_size else 0 for size in sizes],
        WindowRule.parse(name[0]).log_rank(sizes[-1]),
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


def _curve_rows(
    keys: dict[str, Any], result: SeriesExponent | None, settings: ExtrapolationSettings
) -> list[Row]:
    if result is None or result.found is None:
        return []
    omega = settings.omegas[int(result.found.omega_weights.argmax())]
    abscissa = np.linspace(0, result.fitted_sizes[0] ** -omega * 1.05, CURVE_POINTS)
    with np.errstate(divide="ignore"):
        sizes = abscissa ** (-1 / omega)
    curve = result.curve(sizes)
    return [
        {
            **keys,
            "size": float(size),
            "omega": omega,
            "exponent": float(curve.value[i]),
            "statistical": float(curve.statistical[i]),
            "systematic": float(curve.systematic[i]),
        }
        for i, size in enumerate(sizes)
    ]
