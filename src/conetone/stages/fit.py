"""Stage fit: one series at all its sizes."""

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from conetone.fit.average import information_criterion
from conetone.fit.models import MODELS
from conetone.fit.powerlaw import DataVector, PowerLawFit, fit_power_law
from conetone.fit.profile import profile
from conetone.fit.ranking import bin_logs, ranked_magnitudes, standard_error
from conetone.fit.windows import WindowRule, bins_of_windows
from conetone.records.files import inputs_digest, read_rows
from conetone.records.tables import Row
from conetone.sprinkle.catalogue import PARAMETER_NAMES
from conetone.stages.whole import taken_up, write_all
from conetone.sweep.paths import PIECE_TABLES, piece_path, spectra_path
from conetone.sweep.requests import FitRequest

# Bins of a whole spectrum for display.
PROFILE_BINS = 36
SMALLEST_NUMBER_OF_BINS = 4
SPECTRA_COLUMNS = [
    "replicate",
    "leading_count",
    "tolerance",
    "eigenvalues",
    "ordering_fraction",
    "status",
]


def fit_series(request: FitRequest) -> None:
    """Read the spectra of one series; write its fits, bins and profiles."""
    operator = request.series.operator
    paths = {s: [spectra_path(block, operator) for block in request.blocks(s)] for s in request.sizes}
    outputs = {table: piece_path(request.series.name, table) for table in PIECE_TABLES}
    inputs = inputs_digest([path for size in request.sizes for path in paths[size]])
    if taken_up(outputs, request.text(), inputs):
        return
    tables: dict[str, list[Row]] = {table: [] for table in PIECE_TABLES}
    for size in request.sizes:
        rows = [row for path in paths[size] for row in read_rows(path, SPECTRA_COLUMNS)]
        for table, found in _tables_of_size(request, size, rows).items():
            tables[table] += found
    write_all(outputs, tables, request.text(), inputs)


@dataclass(frozen=True)
class _Usable:
    """The spectra of one size that can be ranked."""

    replicates: list[int]
    magnitudes: list[NDArray[np.float64]]
    ordering_fractions: NDArray[np.float64]
    attempted: int
    failed: int


def _usable(request: FitRequest, rows: list[dict[str, Any]]) -> _Usable:
    good = [row for row in rows if row["status"] == "ok"]
    ranked = [
        ranked_magnitudes(
            np.array(row["eigenvalues"]),
            request.series.operator.part,
            count=row["leading_count"],
            tolerance=row["tolerance"] or 0.0,
        )
        for row in good
    ]
    kept = [(row, magnitudes) for row, magnitudes in zip(good, ranked, strict=True) if len(magnitudes)]
    return _Usable(
        [row["replicate"] for row, _ in kept],
        [magnitudes for _, magnitudes in kept],
        np.array([row["ordering_fraction"] for row, _ in kept], dtype=np.float64),
        attempted=len(rows),
        failed=len(rows) - len(good),
    )


def _tables_of_size(request: FitRequest, size: int, rows: list[dict[str, Any]]) -> dict[str, list[Row]]:
    usable = _usable(request, rows)
    keys = {**request.series.key_columns(PARAMETER_NAMES), "size": size}
    shared: dict[str, Any] = {
        **keys,
        "copies_replicate": usable.replicates,
        "ordering_fraction": None,
        "ordering_fraction_error": None,
        "scatter": None,
        "replicates_used": len(usable.replicates),
        "replicates_failed": usable.failed,
        "replicates_attempted": usable.attempted,
    }
    if len(usable.replicates) < 2:
        found = f"{len(usable.replicates)} usable of {usable.attempted} replicates; an error bar takes two"
        return {"fits": _no_fits(request, shared, found), "bins": [], "profiles": []}
    shared["ordering_fraction"] = float(usable.ordering_fractions.mean())
    shared["ordering_fraction_error"] = float(standard_error(usable.ordering_fractions))
    profiles = _profile_rows(keys, usable)
    ranks = min(len(magnitudes) for magnitudes in usable.magnitudes)
    windows = {
        rule: window
        for rule in request.windows.rules
        if (window := rule.at(size, request.windows.smallest_rank)).last <= ranks + 1
        and window.first < window.last
    }
    bins = bins_of_windows(list(windows.values()), request.windows.bins) if windows else None
    if bins is None:
        found = f"{ranks} ranks with non-zero eigenvalues, fewer than any window takes"
        return {"fits": _no_fits(request, shared, found), "bins": [], "profiles": profiles}
    if bins.count < SMALLEST_NUMBER_OF_BINS:
        found = f"{bins.count} bins of rank in the windows; a fit takes {SMALLEST_NUMBER_OF_BINS}"
        return {"fits": _no_fits(request, shared, found), "bins": [], "profiles": profiles}
    vector = DataVector.of(bin_logs(usable.magnitudes, bins))
    shared["scatter"] = float(vector.scatter[0])
    fits = {
        (rule, name): fit_power_law(vector, MODELS[name], windows[rule]) if rule in windows else None
        for rule in request.windows.rules
        for name in request.windows.models
    }
    return {
        "fits": [_fit_row(shared, rule, model, fit) for (rule, model), fit in fits.items()],
        "bins": _bin_rows(keys, vector, fits),
        "profiles": profiles,
    }


def _no_fits(request: FitRequest, shared: dict[str, Any], reason: str) -> list[Row]:
    return [
        _fit_row(shared, rule, model, None, reason)
        for rule in request.windows.rules
        for model in request.windows.models
    ]


def _fit_row(
    shared: dict[str, Any],
    rule: WindowRule,
    model: str,
    fit: PowerLawFit | None,
    reason: str = "too few ranks or bins in this window at this size",
) -> Row:
    row = {**shared, "window": str(rule), "model": model, "weight": None}
    if fit is None:
        results = dict.fromkeys(
            ("exponent", "statistical", "misfit", "chi2", "degrees", "bins_cut", "parameters", "copies",
             "statistical_copies", "misfit_copies", "chi2_copies")
        )  # fmt: skip
        return {**row, **results, "status": "failed", "reason": reason}
    estimates = fit.estimates
    return {
        **row,
        "exponent": float(estimates.exponent[0]),
        "statistical": float(estimates.statistical[0]),
        "misfit": float(estimates.misfit[0]),
        "chi2": float(estimates.chi2[0]),
        "degrees": fit.degrees,
        "bins_cut": fit.bins_cut,
        "parameters": fit.parameters,
        "copies": estimates.exponent[1:],
        "statistical_copies": estimates.statistical[1:],
        "misfit_copies": estimates.misfit[1:],
        "chi2_copies": estimates.chi2[1:],
        "status": "ok",
        "reason": None,
    }


def _best(fits: Mapping[tuple[WindowRule, str], PowerLawFit | None]) -> tuple[WindowRule, str] | None:
    made = {key: fit for key, fit in fits.items() if fit is not None}
    if not made:
        return None
    criterion = information_criterion(
        np.array([[fit.estimates.chi2[0] for fit in made.values()]]),
        np.array([len(fit.parameters) for fit in made.values()], dtype=np.float64),
        np.array([[fit.bins_cut for fit in made.values()]], dtype=np.float64),
    )
    return list(made)[int(criterion.argmin())]


def _bin_rows(
    keys: dict[str, Any], vector: DataVector, fits: Mapping[tuple[WindowRule, str], PowerLawFit | None]
) -> list[Row]:
    best = _best(fits)
    fit = fits[best] if best else None
    data = vector.data
    edges = data.bins.edges
    ranks = np.exp(data.bins.average(np.log(np.arange(1, data.bins.last + 1))))
    rows: list[Row] = []
    for b in range(data.bins.count):
        fitted = float(fit.fitted[b]) if fit and np.isfinite(fit.fitted[b]) else None
        mean, error = float(data.mean[b]), float(data.error[b])
        rows.append(
            {
                **keys,
                "first_rank": edges[b],
                "last_rank": edges[b + 1] - 1,
                "rank": float(ranks[b]),
                "log_magnitude": mean,
                "log_magnitude_error": error,
                "window": str(best[0]) if best else None,
                "model": best[1] if best else None,
                "fitted": fitted,
                "residual": None if fitted is None or error == 0 else (mean - fitted) / error,
            }
        )
    return rows


def _profile_rows(keys: dict[str, Any], usable: _Usable) -> list[Row]:
    found = profile(usable.magnitudes, PROFILE_BINS)
    columns = ("rank", "log_magnitude", "log_magnitude_error", "slope_rank", "slope", "slope_error")
    return [{**keys, **{c: _finite(getattr(found, c)[b]) for c in columns}} for b in range(len(found.rank))]


def _finite(value: float) -> float | None:
    return float(value) if np.isfinite(value) else None
