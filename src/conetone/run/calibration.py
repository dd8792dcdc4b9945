"""What a calibration came to: coverage of every truth and series, for people and as JSON."""

import json
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from rich import box
from rich.table import Table

from conetone.records.files import read_rows
from conetone.run.outcome import ensemble_label, plain_console
from conetone.run.progress import duration
from conetone.sweep.calibration import Calibration
from conetone.sweep.paths import CALIBRATION_TABLE, FIGURE_FOLDER, closing_path

TOGETHER = ("inside", "outside")
HEADERS = ("truth", "68 %", "95 %", "bias", "error", "excess", "failed", "")
# What is promised, as `aggregate/promise.py` has it, is in the verdicts; this says it in words.
PROMISE = (
    "68 %: share of truths within the total error, 95 %: within twice that, each ± its binomial error."
    " Promised inside the models are 63 and 92 %, outside 58 and 88 %; a share breaks that if it is lower by"
    " more than two binomial errors. bias: mean of (exponent − truth)/error. error: mean total error."
    " excess: by what factor errors are larger than exactly 68 % would need."
)


@dataclass(frozen=True)
class CalibrationOutcome:
    """The rows of calibration.parquet and where they stand; `folder` is absolute."""

    sweep: str
    folder: Path
    injections: int
    rows: list[dict[str, Any]]
    jobs: int
    jobs_run: int
    seconds: float

    @classmethod
    def read(
        cls, folder: Path, calibration: Calibration, jobs_run: int, seconds: float
    ) -> "CalibrationOutcome":
        """Read the finished table."""
        rows = read_rows(folder / closing_path(CALIBRATION_TABLE))
        jobs = sum(len(calibration.jobs[stage]) for stage in ("inject", "coverage"))
        return cls(calibration.plan.sweep.name, folder, calibration.injections, rows, jobs, jobs_run, seconds)

    @property
    def broken(self) -> list[dict[str, Any]]:
        """Rows of the quoted estimator whose errors are smaller than promised."""
        return [row for row in self.rows if row["quoted"] and row["verdict"] == "too narrow"]

    @property
    def empty(self) -> list[dict[str, Any]]:
        """Rows of the quoted estimator without a single injection that has an exponent."""
        return [row for row in self.rows if row["quoted"] and not row["injections"]]

    def tables(self) -> Iterator[tuple[dict[str, Any], list[dict[str, Any]]]]:
        """For each series and estimator its first row, then all of them."""
        for series, estimator in dict.fromkeys((row["series"], row["estimator"]) for row in self.rows):
            rows = [r for r in self.rows if (r["series"], r["estimator"]) == (series, estimator)]
            yield rows[0], rows


def print_calibration(outcome: CalibrationOutcome) -> None:
    """Print a table for each series and estimator, what was promised, and the paths."""
    console = plain_console()
    if outcome.jobs_run:
        console.print(f"{outcome.jobs_run} jobs run in {duration(outcome.seconds)}, {outcome.jobs} in all.")
    else:
        console.print(f"Nothing to do: all {outcome.jobs} jobs are up to date ({outcome.seconds:.1f} s).")
    for first, rows in outcome.tables():
        standing = "quoted" if first["quoted"] else "for comparison"
        name = (
            f"{ensemble_label(first)}: {first['matrix']} {first['part']}, {first['estimator']} ({standing})"
        )
        reason = next((row["reason"] for row in rows if row["reason"]), None)
        if not any(row["injections"] for row in rows):
            console.print(f"\n{name}\n  no coverage: {reason}", soft_wrap=True)
            continue
        console.print(_table(name, rows))
        if first["quoted"] and reason:
            console.print(f"  some injections have no exponent: {reason}", soft_wrap=True)
    console.print(PROMISE)
    broken = len(outcome.broken)
    judged = sum(row["quoted"] and row["injections"] > 0 for row in outcome.rows)
    console.print(
        f"\nErrors are smaller than promised in {broken} of {judged} rows of the quoted estimator."
        if broken
        else f"\nErrors keep what is promised in all {judged} rows of the quoted estimator."
    )
    if outcome.empty:
        console.print(f"Nothing was measured in {len(outcome.empty)} rows: see their reasons.")
    console.print(f"Table:  {outcome.folder / closing_path(CALIBRATION_TABLE)}", soft_wrap=True)
    console.print(
        f"Figure: {outcome.folder / FIGURE_FOLDER / CALIBRATION_TABLE} (.pdf .png .csv)", soft_wrap=True
    )


def _table(title: str, rows: list[dict[str, Any]]) -> Table:
    table = Table(box=box.SIMPLE_HEAD, pad_edge=False, title=title, title_justify="left", title_style="bold")
    for header in HEADERS:
        table.add_column(header, justify="left" if header in ("truth", "") else "right", no_wrap=True)
    for inside in (True, False):
        mine = [row for row in rows if row["inside"] == inside]
        for row in mine:
            together = row["truth"] in TOGETHER
            table.add_row(*_cells(row), end_section=together and inside, style="bold" if together else None)
    return table


def _cells(row: dict[str, Any]) -> tuple[str, ...]:
    name = f"all {row['truth']}" if row["truth"] in TOGETHER else row["truth"]
    failed = str(row["failed"]) if row["failed"] else ""
    if not row["injections"]:
        return (name, "none", "", "", "", "", failed, "")
    verdict = "" if row["verdict"] == "kept" else row["verdict"]
    return (
        name,
        _share(row, "coverage_68"),
        _share(row, "coverage_95"),
        f"{row['bias']:+.2f} σ",
        f"{row['width']:.2g}",
        f"{row['excess']:.2f}",
        failed,
        verdict,
    )


def _share(row: dict[str, Any], name: str) -> str:
    """`72.5 ± 2.2 %`, half the length of the interval standing for the error."""
    half = (row[f"{name}_high"] - row[f"{name}_low"]) / 2
    return f"{100 * row[name]:.1f} ± {100 * half:.1f}"


def print_calibration_json(outcome: CalibrationOutcome) -> None:
    """Print the outcome as one JSON object."""
    print(
        json.dumps(
            {
                "sweep": outcome.sweep,
                "folder": str(outcome.folder),
                "injections": outcome.injections,
                "jobs": outcome.jobs,
                "jobs_run": outcome.jobs_run,
                "seconds": round(outcome.seconds, 3),
                "broken": len(outcome.broken),
                "calibration": outcome.rows,
            },
            indent=2,
        )
    )
