"""Spectra tables made up for tests: power laws with noise, written as the stage `diagonalise` writes them."""

from collections.abc import Callable, Sequence
from pathlib import Path
from typing import Any

import numpy as np

from conetone.records.files import read_rows, write_table
from conetone.records.tables import SPECTRA
from conetone.sprinkle.catalogue import PARAMETER_NAMES
from conetone.stages.aggregate import aggregate_sweep
from conetone.stages.fit import fit_series
from conetone.sweep.definition import resolve_sweep
from conetone.sweep.plan import Plan

SIZES = [64, 90, 128, 181]
EXPONENT = 0.75
# Eigenvalues of one replicate, given the size and its number; None if the replicate failed.
Spectrum = Callable[[int, int], Sequence[float] | None]


def plan(**changes: Any) -> Plan:
    fields = {
        "sweep": "made-up",
        "root_seed": 1,
        "ensembles": [{"ensemble": "minkowski-diamond", "dimension": 3}],
        "sizes": SIZES,
        "replicates": 6,
        "operators": [{"matrix": "causal", "part": "antisymmetric"}],
    }
    return Plan(resolve_sweep({**fields, **changes}))


def power_law(size: int, replicate: int, *, exponent: float = EXPONENT, noise: float = 0.02) -> list[float]:
    """λ_r = n/3 r^−α (1 + noise) and its negative, r = 1 … n/2."""
    generator = np.random.default_rng([size, replicate])
    ranks = np.arange(1, size // 2 + 1)
    positive = size / 3 * ranks**-exponent * np.exp(noise * generator.standard_normal(len(ranks)))
    return [*positive, *-positive]


def write_spectra(of: Plan, spectrum: Spectrum) -> None:
    """Every spectra table of a plan."""
    for job in of.jobs["diagonalise"].values():
        request = job.request
        point = request.point
        rows = []
        for replicate in range(request.first, request.stop):
            eigenvalues = spectrum(point.size, replicate)
            row = dict.fromkeys(column.name for column in SPECTRA.columns) | {
                **point.choice.key_columns(PARAMETER_NAMES),
                "point": point.name,
                "size": point.size,
                "replicate": replicate,
                "matrix": request.matrix,
                "part": request.part,
                "extent": request.spectrum.extent,
                "leading_count": request.spectrum.count,
                "tolerance": request.spectrum.tolerance,
                "ordering_fraction": 0.23 + 0.001 * replicate,
                "threads": 1,
                "seconds": 0.0,
                "peak_mib": 1.0,
                "status": "ok",
            }
            failure = {"status": "failed", "reason": "killed", "ordering_fraction": None}
            rows.append(row | (failure if eigenvalues is None else {"eigenvalues": sorted(eigenvalues)}))
        job.outputs[0].parent.mkdir(parents=True, exist_ok=True)
        write_table(job.outputs[0], SPECTRA, rows, request=request.text())


def close(of: Plan, spectrum: Spectrum = power_law) -> list[dict[str, Any]]:
    """Run the stages fit and aggregate on such spectra; rows of `exponents`."""
    write_spectra(of, spectrum)
    for job in of.jobs["fit"].values():
        fit_series(job.request)
    aggregate_sweep(of.job("aggregate", "all").request)
    return table("exponents")


def table(name: str) -> list[dict[str, Any]]:
    """Rows of one closing table."""
    return read_rows(Path(f"{name}.parquet"))
