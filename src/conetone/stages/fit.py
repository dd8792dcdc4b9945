"""Stage fit: one series at all its sizes, by both estimators."""

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from conetone.fit.average import information_criterion
from conetone.fit.logs import smooth_logs, standard_error
from conetone.fit.models import EXPONENT
from conetone.fit.powerlaw import DataVector, PowerLawFit
from conetone.fit.profile import profile
from conetone.fit.ranking import ranked_magnitudes
from conetone.fit.size import ESTIMATORS, SizeSpectra, fit_size
from conetone.fit.smoothcount import SmoothRanks, smooth_share
from conetone.fit.windows import RankBins, WindowRule
from conetone.records.files import inputs_digest, read_rows
from conetone.records.tables import Row
from conetone.sprinkle.catalogue import PARAMETER_NAMES
from conetone.stages.whole import taken_up, write_all
from conetone.sweep.paths import PIECE_TABLES, piece_path, spectra_path
from conetone.sweep.requests import FitRequest

# Bins of a whole spectrum for display.
PROFILE_BINS = 36
# Smooth ranks at which cut-offs are extrapolated to infinite size, for the amplitudes: two an octave.
CUTOFF_RANKS = tuple(4 * 2 ** (i / 2) for i in range(13))
# Spectra flatter than this fall too slowly for a rank at which λ = Λ to mean much.
FLATTEST_SHOWN = 0.5
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
class UsableSpectra:
    """The spectra of one size that can be ranked."""

    replicates: list[int]
    magnitudes: list[NDArray[np.float64]]
    ordering_fractions: NDArray[np.float64]
    complete: bool
    attempted: int
    failed: int


def usable_spectra(request: FitRequest, rows: list[dict[str, Any]]) -> UsableSpectra:
    """Those of the rows of one size, from the spectra table, that are ok and have a non-zero eigenvalue."""
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
    return UsableSpectra(
        [row["replicate"] for row, _ in kept],
        [magnitudes for _, magnitudes in kept],
        np.array([row["ordering_fraction"] for row, _ in kept], dtype=np.float64),
        complete=all(row["leading_count"] is None for row, _ in kept),
        attempted=len(rows),
        failed=len(rows) - len(good),
    )


def _tables_of_size(request: FitRequest, size: int, rows: list[dict[str, Any]]) -> dict[str, list[Row]]:
    usable = usable_spectra(request, rows)
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
    enough = len(usable.replicates) >= 2
    if enough:
        shared["ordering_fraction"] = float(usable.ordering_fractions.mean())
        shared["ordering_fraction_error"] = float(standard_error(usable.ordering_fractions))
    spectra = SizeSpectra(size, usable.magnitudes, usable.complete)
    tables: dict[str, list[Row]] = {
        "fits": [],
        "bins": [],
        "profiles": _profile_rows(keys, usable) if enough else [],
        "cutoffs": _cutoff_rows(keys, usable, spectra) if enough else [],
    }
    for estimator in ESTIMATORS:
        found = fit_size(spectra, request.windows, estimator)
        reason = found.reason or "too few ranks, bins or smooth ranks in this window at this size"
        if not enough:
            reason = (
                f"{len(usable.replicates)} usable of {usable.attempted} replicates; an error bar takes two"
            )
        scatter = float(found.vector.scatter[0]) if found.vector else None
        for rule, model in request.windows.candidates:
            columns = {**shared, "estimator": estimator, "scatter": scatter}
            tables["fits"].append(_fit_row(columns, rule, model, found.fits.get((rule, model)), reason))
        if estimator == request.windows.estimator and found.vector:
            tables["bins"] = _bin_rows({**keys, "estimator": estimator}, found.vector, found.fits)
    return tables


def _cutoff_rows(keys: dict[str, Any], usable: UsableSpectra, spectra: SizeSpectra) -> list[Row]:
    found = smooth_logs(usable.magnitudes, SmoothRanks(CUTOFF_RANKS), complete=spectra.complete)
    logs = found.values - np.log(spectra.size)
    rows: list[Row] = []
    for rank, values in zip(CUTOFF_RANKS, logs.T, strict=True):
        if np.isfinite(values).all():
            mean = float(values.mean())
            copies = mean + (mean - values) / (len(values) - 1)
            rows.append(
                {
                    **keys,
                    "smooth_rank": rank,
                    "log_cutoff": mean,
                    "copies": copies,
                    "copies_replicate": usable.replicates,
                }
            )
    return rows


def _fit_row(
    shared: dict[str, Any],
    rule: WindowRule,
    model: str,
    fit: PowerLawFit | None,
    reason: str,
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
    ranks = data.axis.ranks
    firsts = lasts = ranks
    if isinstance(data.axis, RankBins):
        edges = np.array(data.axis.edges)
        firsts, lasts = edges[:-1], edges[1:] - 1
    else:
        exponent = float(fit.parameters[EXPONENT]) if fit else 1.0
        ranks = ranks / smooth_share(max(exponent, FLATTEST_SHOWN))
    rows: list[Row] = []
    for b in range(data.axis.count):
        fitted = float(fit.fitted[b]) if fit and np.isfinite(fit.fitted[b]) else None
        mean, error = float(data.mean[b]), float(data.error[b])
        rows.append(
            {
                **keys,
                "first_rank": float(firsts[b]),
                "last_rank": float(lasts[b]),
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


def _profile_rows(keys: dict[str, Any], usable: UsableSpectra) -> list[Row]:
    found = profile(usable.magnitudes, PROFILE_BINS)
    columns = ("rank", "log_magnitude", "log_magnitude_error", "slope_rank", "slope", "slope_error")
    return [{**keys, **{c: _finite(getattr(found, c)[b]) for c in columns}} for b in range(len(found.rank))]


def _finite(value: float) -> float | None:
    return float(value) if np.isfinite(value) else None
