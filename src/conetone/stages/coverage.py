"""Stage coverage: how often the errors of all injections held, as a table and a figure."""

from collections.abc import Sequence
from pathlib import Path
from typing import Any

import numpy as np

from conetone.aggregate.coverage import Coverage
from conetone.aggregate.promise import verdict
from conetone.figure.calibration import calibration_numbers, draw_calibration
from conetone.figure.files import write_figure
from conetone.figure.style import theme
from conetone.fit.size import ESTIMATORS
from conetone.records.files import inputs_digest, read_rows, write_table
from conetone.records.tables import CALIBRATION, SERIES_KEYS, Row
from conetone.stages.inject import RESULTS
from conetone.sweep.calibration import injections_paths
from conetone.sweep.paths import CALIBRATION_TABLE, FIGURE_FOLDER, closing_path
from conetone.sweep.requests import CoverageRequest

PIT_BINS = 20
# Truths of one sort together.
TOGETHER = {True: "inside", False: "outside"}


def collect_coverage(request: CoverageRequest) -> None:
    """Read every injection; write calibration.parquet and its figure."""
    rows: list[Row] = []
    paths: list[Path] = []
    for each in request.series:
        here = injections_paths(each)
        paths += here
        injections = [row for path in here for row in read_rows(path)]
        for truth in each.truths:
            rows += _of_both([row for row in injections if row["truth"] == truth], truth)
        for inside, name in TOGETHER.items():
            rows += _of_both([row for row in injections if row["inside"] == inside], name)
    inputs = inputs_digest(paths)
    write_table(closing_path(CALIBRATION_TABLE), CALIBRATION, rows, request=request.text(), inputs=inputs)
    keys = [column.name for column in SERIES_KEYS]
    with theme():
        numbers = calibration_numbers(rows, keys)
        write_figure(FIGURE_FOLDER / CALIBRATION_TABLE, draw_calibration(numbers, rows, keys), numbers)


def _of_both(injections: Sequence[dict[str, Any]], truth: str) -> list[Row]:
    """Rows of the quoted estimator and of the other one."""
    quoted = injections[0]["estimator"]
    (other,) = (name for name in ESTIMATORS if name != quoted)
    return [_row(injections, truth, quoted, ""), _row(injections, truth, other, "other_")]


def _row(injections: Sequence[dict[str, Any]], truth: str, estimator: str, prefix: str) -> Row:
    first = injections[0]
    found = [row for row in injections if row[f"{prefix}exponent"] is not None]
    return {
        **{column.name: first[column.name] for column in SERIES_KEYS},
        "estimator": estimator,
        "quoted": not prefix,
        "truth": truth,
        "inside": first["inside"],
        "injections": len(found),
        "failed": len(injections) - len(found),
        **(_columns(found, prefix, first["inside"]) if found else _NOTHING),
        "reason": next((row["reason"] for row in injections if row["reason"]), None),
    }


def _columns(found: Sequence[dict[str, Any]], prefix: str, inside: bool) -> dict[str, Any]:
    value, statistical, systematic = (np.array([row[f"{prefix}{name}"] for row in found]) for name in RESULTS)
    truth = np.array([row["true_exponent"] for row in found])
    coverage = Coverage(value, np.hypot(statistical, systematic), truth)
    one, two = coverage.within(1), coverage.within(2)
    histogram, _ = np.histogram(coverage.pit, bins=PIT_BINS, range=(0, 1))
    return {
        "coverage_68": one.value,
        "coverage_68_low": one.low,
        "coverage_68_high": one.high,
        "coverage_95": two.value,
        "coverage_95_low": two.low,
        "coverage_95_high": two.high,
        "bias": coverage.bias,
        "spread": coverage.spread,
        "width": coverage.width,
        "excess": coverage.excess,
        "pit": histogram.tolist(),
        "verdict": verdict(coverage, inside=inside),
    }


_NUMBERS = (
    *(f"coverage_{level}{end}" for level in (68, 95) for end in ("", "_low", "_high")),
    "bias",
    "spread",
    "width",
    "excess",
)
_NOTHING: dict[str, Any] = {**dict.fromkeys(_NUMBERS), "pit": [0] * PIT_BINS, "verdict": "none"}
