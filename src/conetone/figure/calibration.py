"""Figure `calibration`: how often total errors held, truth by truth, and the whole distribution of pulls."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.lines import Line2D

from conetone.figure.closing import ClosingTables, Row, layer
from conetone.figure.labels import ensemble_label, operator_symbol
from conetone.figure.panels import Panel, add_note, legend_above, new_page, no_ticks, say
from conetone.figure.style import INK, look_of_category

COLUMNS = ("layer", "standing", "estimator", "truth", "sort", "level", "low", "share", "high", "density")
# Nominal shares, by the name of their columns: within one standard deviation and within two.
NOMINAL = {"68": 0.6827, "95": 0.9545}
MARKERS = {"68": "o", "95": "s"}
SORTS = ("inside", "outside")
TRUTH_INCHES, PIT_INCHES = 0.2, 0.75
# Below the line of their truth, in parts of the distance between lines.
SHIFTS = {("quoted", "68"): -0.27, ("quoted", "95"): -0.09, ("other", "68"): 0.09, ("other", "95"): 0.27}
GREY = "0.6"
SORT_DASHES: Mapping[str, Any] = {"inside": "-", "outside": (0, (2, 1))}
LEVEL_WORDS = {"68": "one total error", "95": "two total errors"}
NOTE = (
    "Above: share of injected truths within one total error and within two, with binomial errors of one"
    " standard deviation; dashed, the shares of a normal distribution. Below: where the truth lies in the"
    " distribution that value and error describe, by the estimator quoted; flat if errors are right, a hill"
    " if they are wide, a valley if they are narrow, a slope if exponents are biased."
)


def calibration_numbers(rows: Sequence[Row], keys: Sequence[str]) -> pd.DataFrame:
    """What the figure draws: layers coverage (of every truth and estimator) and pit (of the quoted one).

    In the layer pit `low` and `high` are the edges of a bin, and `density` is 1 where errors are right.
    """
    found: list[dict[str, Any]] = []
    for row in rows:
        if not row["injections"]:
            continue
        shared = {
            **{name: row[name] for name in keys},
            "standing": "quoted" if row["quoted"] else "other",
            "estimator": row["estimator"],
            "truth": row["truth"],
            "sort": SORTS[0] if row["inside"] else SORTS[1],
        }
        for level in NOMINAL:
            name = f"coverage_{level}"
            share = {"share": row[name], "low": row[f"{name}_low"], "high": row[f"{name}_high"]}
            found.append({**shared, "layer": "coverage", "level": int(level), **share})
        if row["quoted"] and row["truth"] in SORTS:
            found += [{**shared, "layer": "pit", **each} for each in _densities(row["pit"])]
    return _tables(keys).numbers(COLUMNS, found)


def _tables(keys: Sequence[str]) -> ClosingTables:
    """No tables, but what they know of keys."""
    return ClosingTables(list(keys), (), (), (), (), ())


def _densities(counts: Sequence[int]) -> list[dict[str, float]]:
    edges = np.linspace(0, 1, len(counts) + 1)
    density = np.array(counts) * len(counts) / max(sum(counts), 1)
    return [
        {"low": float(low), "high": float(high), "density": float(each)}
        for low, high, each in zip(edges[:-1], edges[1:], density, strict=True)
    ]


def draw_calibration(numbers: pd.DataFrame, rows: Sequence[Row], keys: Sequence[str]) -> Figure:
    """Draw `calibration_numbers`: a panel for each series, coverage above, the distribution below."""
    series = {row["series"]: row for row in rows}
    truths, parameters = _order(rows), _tables(keys).parameters
    titles = [_title(row, parameters) for row in series.values()]
    page = new_page(titles, [TRUTH_INCHES * len(truths) + 0.1, PIT_INCHES])
    for panel, name in zip(page.panels, series, strict=True):
        drawn = numbers[(numbers["series"] == name).to_numpy(dtype=bool)]
        if drawn.empty:
            say(page, panel, "no coverage: no exponent")
        _draw_coverage(panel.axes[0], drawn, truths, labelled=panel.outer_left)
        _draw_pit(panel.axes[1], drawn)
        _label(panel)
    if rows:
        legend_above(page.figure, _legend(rows))
        add_note(page.figure, NOTE)
    else:
        no_ticks(*page.figure.axes)
    return page.figure


def _title(row: Row, parameters: Sequence[str]) -> str:
    return f"{ensemble_label(row, parameters)}: {operator_symbol(_Operator(row['matrix'], row['part']))}"


@dataclass(frozen=True)
class _Operator:
    """The operator of a row."""

    matrix: str
    part: str


def _order(rows: Sequence[Row]) -> list[str]:
    """Truths from top to bottom: those inside the models, all of them together, then the others."""
    order: list[str] = []
    for sort, inside in zip(SORTS, (True, False), strict=True):
        names = dict.fromkeys(row["truth"] for row in rows if row["inside"] == inside)
        order += [name for name in names if name not in order and name not in SORTS]
        order += [sort] if sort in names else []
    return order


def _draw_coverage(axes: Axes, numbers: pd.DataFrame, truths: Sequence[str], *, labelled: bool) -> None:
    for level, nominal in NOMINAL.items() if not numbers.empty else ():
        axes.axvline(nominal, color=INK, linewidth=0.6, dashes=(4, 2), gid=f"nominal:{level}", zorder=1)
    if SORTS[0] in truths and not numbers.empty:
        axes.axhline(truths.index(SORTS[0]) + 0.5, color=GREY, linewidth=0.4, zorder=1)
    drawn = layer(numbers, "coverage")
    for (standing, level), shift in SHIFTS.items():
        chosen = (drawn["standing"] == standing) & (drawn["level"] == int(level))
        here = drawn[chosen.to_numpy(dtype=bool)]
        if here.empty:
            continue
        colour = look_of_category(("quoted", "other").index(standing)).colour
        y = np.array([truths.index(truth) for truth in here["truth"]]) + shift
        gid = f"coverage:{standing}:{level}"
        axes.hlines(y, here["low"], here["high"], colors=[colour], linewidth=0.7, zorder=2.5).set_gid(gid)
        axes.plot(
            here["share"], y, linestyle="none", marker=MARKERS[level], markersize=2.6, markeredgewidth=0.6,
            color=colour, markerfacecolor=colour if standing == "quoted" else "white", gid=f"{gid}:shares",
            zorder=3, clip_on=False,
        )  # fmt: skip
    axes.set(xlim=(0, 1), ylim=(len(truths) - 0.4, -0.6), yticks=range(len(truths)))
    axes.tick_params(axis="y", length=0)
    if labelled:
        axes.set_yticklabels([f"all {name}" if name in SORTS else name for name in truths])
        for label in axes.get_yticklabels():
            label.set_fontweight("bold" if label.get_text().startswith("all ") else "normal")


def _draw_pit(axes: Axes, numbers: pd.DataFrame) -> None:
    if numbers.empty:
        return
    axes.axhline(1, color=INK, linewidth=0.6, dashes=(4, 2), gid="uniform", zorder=1)
    drawn = layer(numbers, "pit")
    for sort, dashes in SORT_DASHES.items():
        here = drawn[(drawn["sort"] == sort).to_numpy(dtype=bool)]
        if not here.empty:
            edges = [*here["low"], here["high"].iloc[-1]]
            axes.stairs(
                here["density"], edges, color=look_of_category(0).colour, linestyle=dashes, linewidth=0.9,
                gid=f"pit:{sort}",
            )  # fmt: skip
    axes.set_ylim(bottom=0)


def _label(panel: Panel) -> None:
    if panel.outer_left:
        panel.axes[1].set_ylabel("density")
    if panel.outer_bottom:
        panel.axes[1].set_xlabel(r"above: coverage; below: $\Phi$((truth − exponent)/error)")


def _legend(rows: Sequence[Row]) -> list[Line2D]:
    handles = []
    for standing, quoted in (("quoted", True), ("for comparison", False)):
        name = next((row["estimator"] for row in rows if row["quoted"] == quoted), None)
        if name is not None:
            colour = look_of_category(0 if quoted else 1).colour
            for level, marker in MARKERS.items():
                handles.append(
                    Line2D(
                        [], [], linestyle="none", marker=marker, markersize=3.5, markeredgewidth=0.7,
                        color=colour, markerfacecolor=colour if quoted else "white",
                        label=f"{name} ({standing}), {LEVEL_WORDS[level]}",
                    )
                )  # fmt: skip
    for sort, dashes in SORT_DASHES.items():
        handles.append(
            Line2D([], [], color=look_of_category(0).colour, linestyle=dashes, label=f"{sort} the models")
        )
    return handles
