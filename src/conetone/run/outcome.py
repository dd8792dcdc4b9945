"""What a sweep came to: the closing table, for people and as JSON."""

import json
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from rich import box
from rich.console import Console
from rich.table import Table

from conetone.figure.cells import format_expected, format_replicates, format_sizes, format_value, numbered
from conetone.records.files import read_rows
from conetone.run.progress import duration
from conetone.sprinkle.catalogue import PARAMETER_NAMES
from conetone.sweep.paths import CLOSING_TABLES, LATEX_TABLE, closing_path, figure_paths
from conetone.sweep.plan import Plan
from conetone.sweep.points import EnsembleChoice

# Columns of plain text, where the output is no terminal.
PLAIN_WIDTH = 150
# Columns that the closing table takes; narrower terminals get two lines a series.
TABLE_WIDTH = 125


@dataclass(frozen=True)
class Outcome:
    """The exponents of a sweep and where everything stands; `folder` is absolute.

    `jobs_missing` counts jobs whose outputs do not exist, `replicates_lost` spectra that failed.
    """

    sweep: str
    folder: Path
    exponents: list[dict[str, Any]]
    figures: list[Path]
    jobs: int
    jobs_run: int
    jobs_missing: int
    replicates_lost: int
    seconds: float

    @classmethod
    def read(cls, folder: Path, plan: Plan, jobs_run: int, seconds: float) -> "Outcome":
        """Read the finished tables of a sweep."""
        exponents = folder / closing_path("exponents")
        rows = read_rows(exponents) if exponents.exists() else []  # options such as --until stop before it
        drawn = [path for path in figure_paths(plan.sweep.operators) if path.suffix == ".png"]
        figures = [path for path in drawn if (folder / path).exists()]
        missing, lost = len(plan.missing(folder)), sum(row["replicates_failed"] for row in rows)
        jobs = len(plan.all_jobs)
        return cls(plan.sweep.name, folder, rows, figures, jobs, jobs_run, missing, lost, seconds)


def plain_console() -> Console:
    """Standard output without mark-up: as wide as the terminal, or PLAIN_WIDTH in a file or pipe."""
    console = Console(highlight=False, markup=False)
    if console.is_terminal:
        return console
    return Console(highlight=False, markup=False, width=PLAIN_WIDTH, no_color=True)


def print_table(outcome: Outcome) -> None:
    """Print the closing table, its notes, and the paths, to standard output."""
    console = plain_console()
    if outcome.jobs_run:
        console.print(f"{outcome.jobs_run} jobs run in {duration(outcome.seconds)}, {outcome.jobs} in all.")
    elif not outcome.jobs_missing:
        console.print(f"Nothing to do: all {outcome.jobs} jobs are up to date ({outcome.seconds:.1f} s).")
    if outcome.jobs_missing:
        console.print(f"The options given stop early: {outcome.jobs_missing} jobs are still to do.")
    if not outcome.exponents:
        return
    notes: dict[str, int] = {}
    operators = dict.fromkeys((row["matrix"], row["part"]) for row in outcome.exponents)
    for matrix, part in operators:
        rows = [row for row in outcome.exponents if (row["matrix"], row["part"]) == (matrix, part)]
        if console.width >= TABLE_WIDTH:
            console.print(_table(f"{matrix} {part}", rows, notes))
        else:
            console.print(_lines(f"{matrix} {part}", rows, notes), soft_wrap=True)
    for note, mark in notes.items():
        console.print(f"[{mark}] {note}")
    console.print(f"\nTables:  {outcome.folder}/{{{','.join(CLOSING_TABLES)}}}.parquet", soft_wrap=True)
    console.print(f"Figures: {outcome.folder / 'figures'}", soft_wrap=True)
    for path in outcome.figures:
        console.print(f"         {path.stem} (.pdf .png .csv)", soft_wrap=True)
    if (outcome.folder / LATEX_TABLE).exists():
        console.print(f"LaTeX:   {outcome.folder / LATEX_TABLE}", soft_wrap=True)


def _table(title: str, rows: list[dict[str, Any]], notes: dict[str, int]) -> Table:
    """The rows of one operator; `notes` collects their warnings with a number each."""
    table = Table(box=box.SIMPLE_HEAD, pad_edge=False, title=title, title_justify="left", title_style="bold")
    for header in ("series", "exponent(stat)(sys)", "expected", "sizes", "used/attempted", "notes"):
        table.add_column(header, justify="right" if header == "used/attempted" else "left")
    for row in rows:
        table.add_row(*_cells(row, notes))
    return table


def _lines(title: str, rows: list[dict[str, Any]], notes: dict[str, int]) -> str:
    """The same for a terminal too narrow for the table: two lines a series."""
    lines = [f"\n{title}"]
    for row in rows:
        series, exponent, expected, sizes, replicates, marks = _cells(row, notes)
        lines.append(f"  {series}")
        known = f"expected {expected}" if expected else ""
        lines.append("    " + "  ".join(filter(None, [exponent, known, sizes, replicates, marks])))
    return "\n".join([*lines, ""])


def _cells(row: dict[str, Any], notes: dict[str, int]) -> tuple[str, ...]:
    return (
        ensemble_label(row),
        format_value(row["exponent"], row["statistical"], row["systematic"]),
        format_expected(row),
        format_sizes(row["sizes"]),
        format_replicates(row),
        " ".join(f"[{mark}]" for mark in numbered(row, notes)),
    )


def print_json(outcome: Outcome) -> None:
    """Print the outcome as one JSON object; copies stay in exponents.parquet."""
    bulky = ("copies", "copies_size", "copies_replicate")
    rows = [{k: v for k, v in row.items() if k not in bulky} for row in outcome.exponents]
    print(
        json.dumps(
            {
                "sweep": outcome.sweep,
                "folder": str(outcome.folder),
                "jobs": outcome.jobs,
                "jobs_run": outcome.jobs_run,
                "jobs_missing": outcome.jobs_missing,
                "replicates_lost": outcome.replicates_lost,
                "seconds": round(outcome.seconds, 3),
                "exponents": rows,
                "figures": [str(outcome.folder / path) for path in outcome.figures],
            },
            indent=2,
        )
    )


def ensemble_label(row: dict[str, Any]) -> str:
    """`minkowski-diamond, dimension 3`."""
    given = {name: row[name] for name in PARAMETER_NAMES if row[name] is not None}
    return EnsembleChoice(row["ensemble"], tuple(given.items()), row["count"]).label
