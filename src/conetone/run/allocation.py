"""`conetone allocate`: from a pilot's results to the replicates that a sweep should have."""

import json
import math
import re
from pathlib import Path

from rich import box
from rich.console import Console
from rich.table import Table

from conetone.aggregate.allocate import SMALLEST_FLOOR, allocate_budget, allocate_to_target
from conetone.errors import UsageError
from conetone.run.advice import Advice, as_json_of, notes_of, ratio_of
from conetone.run.outcome import plain_console
from conetone.run.pilot import Pilot, read_pilot
from conetone.run.progress import duration
from conetone.sweep.definition import load_sweep
from conetone.sweep.plan import Plan

SECONDS = {"m": 60.0, "h": 3600.0, "d": 86400.0}
BUDGET = re.compile(r"([0-9]+(?:\.[0-9]+)?) ?([mhd])")
# Values on a line where a terminal is too narrow for the table.
VALUES_A_LINE = 3
UNBOUNDED = 10_000
SIZE_HEADERS = ("size", "replicates", "done", "to compute", "of one", "core time", "to compute", "cost")
SERIES_HEADERS = (
    "series", "systematic", "statistical", "total", "equal: statistical", "equal: total", "ratios",
)  # fmt: skip


def print_allocation(
    sweep_file: Path,
    results: Path,
    target: float | None,
    budget: str | None,
    floor: int | None,
    *,
    as_json: bool,
) -> int:
    """Print the replicates that reach a total error at least cost, or the smallest error within a budget.

    Returns the exit code: 1 if some series cannot reach the target or has no exponent. Raises SweepError for
    a faulty sweep file, UsageError for faulty options or without results of a pilot.
    """
    seconds = _checked(target, budget)
    plan = Plan(load_sweep(sweep_file))
    folder = results.absolute() / plan.sweep.name
    place = "" if results == Path("results") else f" --results {results}"
    pilot = read_pilot(plan, folder, floor or SMALLEST_FLOOR, f"run `conetone run {sweep_file}{place}` first")
    if target is not None:
        found = allocate_to_target(pilot.design, target)
    else:
        assert seconds is not None
        _check_budget(pilot, seconds, str(budget))
        found = allocate_budget(pilot.design, seconds)
    advice = Advice(plan, folder, pilot, found, target, seconds)
    if as_json:
        print(json.dumps(as_json_of(advice), indent=2))
    else:
        _print_text(advice)
    return advice.exit_code


def _checked(target: float | None, budget: str | None) -> float | None:
    """The budget in seconds, if there is one."""
    if (target is None) == (budget is None):
        found = "neither" if target is None else "both"
        raise UsageError("--target and --budget", found, "exactly one of the two", "such as --target 0.005")
    if target is not None and not (target > 0 and math.isfinite(target)):
        raise UsageError("--target", str(target), "a total error above zero", "such as 0.005")
    if budget is None:
        return None
    parts = BUDGET.fullmatch(budget.strip())
    if not parts or float(parts[1]) == 0:
        raise UsageError("--budget", repr(budget), "core time above zero", "such as 90m, 40h or 2d")
    return float(parts[1]) * SECONDS[parts[2]]


def _check_budget(pilot: Pilot, seconds: float, said: str) -> None:
    least = float(pilot.design.cost @ pilot.design.floors)
    if least > seconds:
        raise UsageError(
            "--budget",
            f"{said}, with {_time(float(pilot.design.cost @ pilot.done))} of it spent on the pilot",
            f"{_time(least)} or more, which the fewest replicates take: {pilot.design.floors.tolist()}",
            "give more time, a lower --floor, or the sweep smaller sizes",
        )


def _print_text(advice: Advice) -> None:
    console, found = plain_console(), advice.found
    if found.reachable.any():
        wanted = (
            f"a total error of {advice.target:g}"
            if advice.target is not None
            else f"the smallest total error within {_time(advice.budget or 0)} of core time"
        )
        console.print(f"Sweep {advice.plan.sweep.name}: replicates for {wanted}.", soft_wrap=True)
        _print_rows(console, "Sizes", SIZE_HEADERS, _size_rows(advice))
        _print_rows(console, "Predicted errors", SERIES_HEADERS, _series_rows(advice))
        console.print(
            f"\nCore time in all: {_hours(found.cost)}; still to compute: {_hours(advice.missing_seconds)}"
            f" (orders and spectra; the replicates already there count as done)."
        )
        console.print(
            f"Equal: {found.equal_replicates:.1f} replicates of every size, at the same cost; ratios: its"
            " errors, statistical and total, over those above. The statistical errors are predicted to"
            f" {100 * found.uncertainty.max():.0f} %, by the scatter of the pilot."
        )
        console.print("\nFor the sweep file:\n")
        for line in advice.fragment:
            console.print(f"  {line}", soft_wrap=True)
    for note in notes_of(advice):
        console.print(f"\n{note}")


def _size_rows(advice: Advice) -> list[tuple[str, ...]]:
    return [
        (
            str(size),
            str(count),
            str(each.done),
            str(missing),
            _time(each.seconds),
            _time(count * each.seconds),
            _time(missing * each.seconds),
            each.source,
        )
        for size, count, missing, each in zip(
            advice.sizes, advice.found.replicates, advice.missing, advice.pilot.costs, strict=True
        )
    ]


def _series_rows(advice: Advice) -> list[tuple[str, ...]]:
    found = advice.found
    rows = []
    for i, row in enumerate(advice.pilot.rows):
        values = (row["systematic"], found.statistical[i], found.total[i])
        equal = (found.equal_statistical[i], found.equal_total[i])
        ratio = f"{ratio_of(equal[0], values[1]):.2f}, {ratio_of(equal[1], values[2]):.2f}"
        label = row["label"] if found.reachable[i] else f"{row['label']} (out of reach)"
        rows.append((label, *(f"{value:.3g}" for value in (*values, *equal)), ratio))
    return rows


def _print_rows(console: Console, title: str, headers: tuple[str, ...], rows: list[tuple[str, ...]]) -> None:
    """A table, or for a terminal too narrow a few lines of names and values for each row."""
    table = Table(box=box.SIMPLE_HEAD, pad_edge=False, title=title, title_justify="left")
    for header in headers:
        table.add_column(header, justify="left" if header in ("series", "cost") else "right")
    for row in rows:
        table.add_row(*row)
    unbounded = console.options.update(width=UNBOUNDED)
    if console.measure(table, options=unbounded).maximum <= console.width:
        console.print(table)
        return
    console.print(f"\n{title}")
    for first, *values in rows:
        console.print(f"  {headers[0]} {first}")
        named = [f"{name} {value}" for name, value in zip(headers[1:], values, strict=True)]
        for start in range(0, len(named), VALUES_A_LINE):
            console.print("    " + "; ".join(named[start : start + VALUES_A_LINE]))


def _time(seconds: float) -> str:
    return duration(seconds) if seconds >= 10 else f"{seconds:.2g} s"


def _hours(seconds: float) -> str:
    return f"{seconds / 3600:.3g} core-hours"
