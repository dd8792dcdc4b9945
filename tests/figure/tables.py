"""Closing tables made up for tests: power laws with noise, written through the real schemas."""

from collections.abc import Callable, Sequence
from pathlib import Path
from typing import Any

import numpy as np

from conetone.fit.logs import Estimator
from conetone.records.files import write_table
from conetone.records.tables import EXPONENTS, FITS, SERIES_KEYS, TABLES
from conetone.sweep.paths import CLOSING_TABLES, closing_path
from conetone.sweep.points import OperatorChoice

ANTISYMMETRIC = OperatorChoice("causal", "antisymmetric")
SYMMETRIC = OperatorChoice("causal", "symmetric")
LINK = OperatorChoice("link", "symmetric")
DIAMONDS = [("minkowski-diamond", d) for d in (2, 3, 4)]
SIZES = (256, 362, 512, 724, 1024)
RANKS = np.array([1.0, 2.0, 4.0, 8.0, 16.0, 32.0, 64.0])
FITTED = range(2, 6)
OMEGA = 0.5
SMOOTH_RANKS = (4.0, 5.656854249492381, 8.0, 11.313708498984761, 16.0)

Rows = dict[str, list[dict[str, Any]]]


def make_tables(
    ensembles: Sequence[tuple[str, int | None]],
    operators: Sequence[OperatorChoice] = (ANTISYMMETRIC,),
    sizes: Sequence[int] = SIZES,
    seed: int = 1,
    estimator: Estimator = "smooth-count",
) -> Rows:
    """Rows of every closing table: one series for each ensemble (name and dimension) and operator."""
    rng = np.random.default_rng(seed)
    tables: Rows = {name: [] for name in CLOSING_TABLES}
    for ensemble, dimension in ensembles:
        for operator in operators:
            keys = {column.name: None for column in SERIES_KEYS} | {
                "series": f"{ensemble}-{dimension}-{operator.name}",
                "ensemble": ensemble,
                "dimension": dimension,
                "count": "fixed",
                "matrix": operator.matrix,
                "part": operator.part,
            }
            alpha = 0.5 + 0.5 * rng.random()
            _add_series(tables, keys, sizes, alpha, estimator, rng)
            _add_diagnostics(tables, keys, sizes, alpha, rng)
            _add_amplitudes(tables, keys, alpha, rng)
    return tables


def _add_diagnostics(
    tables: Rows, keys: dict[str, Any], sizes: Sequence[int], alpha: float, rng: np.random.Generator
) -> None:
    def add(kind: str, abscissa: float, quality: float | None, *numbers: float) -> None:
        values = numbers or (None, None, None)
        limit = dict(zip(("exponent", "statistical", "systematic"), values, strict=True))
        tables["diagnostics"].append(
            {**keys, "kind": kind, "abscissa": float(abscissa), **limit, "quality": quality}
        )

    for i, size in enumerate(sizes[:-2]):
        noise = 0.01 * float(rng.standard_normal())
        add("smallest-size", size, 2.5 / (1 + i), alpha + noise, 0.01 + 0.005 * i, 0.02 + 0.01 * i)
    for omega in np.linspace(0.2, 2.0, 19) if len(sizes) > 2 else ():
        value = alpha - 0.03 / omega + 0.04
        add("omega", omega, float(0.6 + (omega - 0.7) ** 2), value, 0.012 / omega, 0.02 / omega)
    for power in np.linspace(0.3, 1.2, 37) if len(sizes) > 1 else ():
        add("collapse", power, float(np.exp(12 * (power - 0.7) ** 2)))
    add("sequence", 1.0, None, alpha, 0.0, 0.001)


def _add_amplitudes(tables: Rows, keys: dict[str, Any], alpha: float, rng: np.random.Generator) -> None:
    known = keys["dimension"] is not None and keys["matrix"] == "causal"
    power = keys["dimension"] / (2 * (keys["dimension"] - 1)) if known else alpha
    for i, rank in enumerate(SMOOTH_RANKS):
        law = 0.3 * rank**-power
        cutoff = law * float(np.exp(0.02 * rng.standard_normal()))
        tables["amplitudes"].append(
            {
                **keys,
                "smooth_rank": rank,
                "cutoff": cutoff,
                "statistical": 0.01 * cutoff,
                "systematic": 0.004 * (1 + i) * cutoff,
                "slope": 2.0 * rank,
                "slope_statistical": 0.3 * rank,
                "slope_systematic": 0.1 * rank,
                "slope_expected": 2.42 * rank if known else None,
                "law": law if known else None,
                "law_standing": "heuristic" if known else None,
                "law_source": "made up for a test" if known else None,
                "deviation": 0.5 if known else None,
            }
        )


def _add_series(
    tables: Rows,
    keys: dict[str, Any],
    sizes: Sequence[int],
    alpha: float,
    estimator: Estimator,
    rng: np.random.Generator,
) -> None:
    smooth = estimator == "smooth-count"
    for size in sizes:
        log_magnitude = np.log(size / 3) - alpha * np.log(RANKS) + 0.02 * rng.standard_normal(len(RANKS))
        error = 0.01 + 0.01 * rng.random(len(RANKS))
        fitted = np.log(size / 3) - alpha * np.log(RANKS)
        slope = -np.diff(log_magnitude) / np.diff(np.log(RANKS))
        for i, rank in enumerate(RANKS):
            shared = {
                **keys,
                "size": size,
                "rank": float(rank),
                "log_magnitude": float(log_magnitude[i]),
                "log_magnitude_error": float(error[i]),
            }
            last = i == len(RANKS) - 1
            tables["profiles"].append(
                {
                    **shared,
                    "slope_rank": None if last else float(rank * np.sqrt(2)),
                    "slope": None if last else float(slope[i]),
                    "slope_error": None if last else 0.03,
                }
            )
            inside = i in FITTED
            tables["bins"].append(
                {
                    **shared,
                    "estimator": estimator,
                    # a bin of ranks, or the smooth rank whose rank this is
                    "first_rank": 0.9 * rank if smooth else rank,
                    "last_rank": 0.9 * rank if smooth else 2 * rank - 1,
                    "window": "a .. b",
                    "model": "power",
                    "fitted": float(fitted[i]) if inside else None,
                    "residual": float((log_magnitude[i] - fitted[i]) / error[i]) if inside else None,
                }
            )
        for window, model in (("a .. b", "power"), ("average", "average")):
            tables["fits"].append(
                dict.fromkeys(column.name for column in FITS.columns)
                | {
                    **keys,
                    "size": size,
                    "estimator": estimator,
                    "window": window,
                    "model": model,
                    "exponent": float(alpha + size**-OMEGA + 0.01 * rng.standard_normal()),
                    "statistical": 0.011,
                    "misfit": 0.023,
                    "copies_replicate": [0, 1],
                    "replicates_used": 2,
                    "replicates_failed": 0,
                    "replicates_attempted": 2,
                    "status": "ok",
                }
            )
    for abscissa in np.linspace(0, 1.05 * min(sizes) ** -OMEGA, 9):
        tables["extrapolations"].append(
            {
                **keys,
                "size": float(abscissa ** (-1 / OMEGA)) if abscissa else np.inf,
                "omega": OMEGA,
                "exponent": float(alpha + abscissa),
                "statistical": 0.02,
                "systematic": 0.031,
            }
        )
    known = keys["dimension"] is not None and keys["matrix"] == "causal"
    exact = known and (keys["dimension"], keys["part"]) == (2, "antisymmetric")
    tables["exponents"].append(
        dict.fromkeys(column.name for column in EXPONENTS.columns)
        | {
            **keys,
            "exponent": alpha,
            "statistical": 0.02,
            "systematic": 0.031,
            "estimator": estimator,
            "sizes": list(sizes),
            "replicates_used": 10,
            "replicates_failed": 0,
            "replicates_attempted": 10,
            # d / (2 (d − 1)), as conetone.reference.exponents has it
            "expected": keys["dimension"] / (2 * (keys["dimension"] - 1)) if known else None,
            "expected_standing": ("exact" if exact else "heuristic") if known else None,
            "expected_source": "made up for a test" if known else None,
            "omegas": [OMEGA],
            "copies_size": [],
            "copies_replicate": [],
            "warnings": [],
            "status": "ok",
        }
    )


def failed(tables: Rows, choose: Callable[[dict[str, Any]], bool], *, also_spectra: bool = False) -> Rows:
    """The tables with the chosen series failed: no extrapolation, and no spectra either if so asked."""
    results = ("exponent", "statistical", "systematic")
    reason = {"status": "failed", "reason": "2 usable sizes; extrapolation takes 3"}

    def kept(name: str) -> list[dict[str, Any]]:
        gone = name == "extrapolations" or (also_spectra and name != "exponents")
        # slopes collapse or do not without any exponent
        return [
            row
            for row in tables[name]
            if not choose(row) or not (gone or row.get("kind") in ("smallest-size", "omega", "sequence"))
        ]

    exponents = [
        {**row, **dict.fromkeys(results), **reason} if choose(row) else row for row in kept("exponents")
    ]
    return {**{name: kept(name) for name in CLOSING_TABLES}, "exponents": exponents}


def write_tables(folder: Path, tables: Rows) -> None:
    for name in CLOSING_TABLES:
        write_table(folder / closing_path(name), TABLES[name], tables[name], request="made up")
