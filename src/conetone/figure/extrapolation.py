"""Figure `extrapolation`: the exponent at each size against n^−ω, and the way to infinite size."""

from typing import Any

import numpy as np
import pandas as pd
from matplotlib.artist import Artist
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.lines import Line2D
from matplotlib.patches import Patch
from matplotlib.ticker import MaxNLocator

from conetone.figure.closing import ClosingTables, Operator, Row, layer, of_series
from conetone.figure.expected import draw_expected, expected_handles, expected_rows
from conetone.figure.labels import ensemble_label, inverse_power, operator_symbol, text_inches
from conetone.figure.panels import add_legend, add_note, new_page, no_ticks, say
from conetone.figure.style import INK, SMALL_POINTS, draw_caps, draw_errors, look_of_category

HEIGHT = 1.65
# Abscissa of a series that has no extrapolation, and so no ω of its own.
PLAIN_OMEGA = 0.5
# Room left of n = ∞ and right of the smallest size, as a share of the range.
ROOM = 0.08
ERROR_COLUMNS = ("statistical_low", "statistical_high", "total_low", "total_high")
COLUMNS = ("layer", "size", "omega", "abscissa", "exponent", *ERROR_COLUMNS, "standing")

# The band of the total error lies below that of the statistical one, and shines through.
_BANDS = {"total": 0.18, "statistical": 0.4}


def extrapolation_numbers(tables: ClosingTables, operator: Operator) -> pd.DataFrame:
    """What the figure draws: layers size (averages at finite size), curve, limit and expected."""
    rows: list[dict[str, Any]] = []
    for series in tables.series_of(operator):
        keys = tables.keys_of(series)
        curve = of_series(tables.extrapolations, series)
        omega = curve[0]["omega"] if curve else PLAIN_OMEGA
        rows += [
            _row(keys, "size", found, found["size"], omega, found["misfit"])
            for found in of_series(tables.fits, series)
            if found["window"] == "average" and found["exponent"] is not None
        ]
        rows += [_row(keys, "curve", found, found["size"], omega, found["systematic"]) for found in curve]
        if series["exponent"] is not None:
            rows.append(_row(keys, "limit", series, np.inf, omega, series["systematic"]))
        rows += expected_rows(keys, series, "exponent")
    return tables.numbers(COLUMNS, rows)


def _row(keys: Row, name: str, found: Row, size: float, omega: float, systematic: float) -> dict[str, Any]:
    return {
        **keys,
        "layer": name,
        "size": size,
        "omega": omega,
        "abscissa": float(size) ** -omega,
        **with_errors(found["exponent"], found["statistical"], systematic),
    }


def with_errors(exponent: float, statistical: float, systematic: float) -> dict[str, float]:
    """An exponent with the ends of its statistical error and of its total error, in quadrature."""
    total = float(np.hypot(statistical, systematic))
    ends = (exponent - statistical, exponent + statistical, exponent - total, exponent + total)
    return {"exponent": exponent, **dict(zip(ERROR_COLUMNS, ends, strict=True))}


def draw_extrapolation(numbers: pd.DataFrame, tables: ClosingTables, operator: Operator) -> Figure:
    """Draw `extrapolation_numbers`, one panel for each series, failed ones too."""
    series = tables.series_of(operator)
    titles = [ensemble_label(row, tables.parameters) for row in series]
    page = new_page(titles, (HEIGHT,), common_axes=False, gap=0.14)
    notes = []
    for panel, row, title in zip(page.panels, series, titles, strict=True):
        (axes,) = panel.axes
        if panel.outer_left:
            axes.set_ylabel(rf"exponent $\alpha(n)$ of {operator_symbol(operator)}")
        if layer(numbers, "size", row["series"]).empty:
            no_ticks(axes)
            say(page, panel, row["reason"] or "no exponent")
            continue
        _draw_series(axes, numbers, row["series"])
        _set_axes(axes, numbers[numbers["series"] == row["series"]])
        draw_expected(axes, numbers, "exponent", row["series"])
        _label_sizes(axes, layer(numbers, "size", row["series"]), page.panel_inches)
        if row["exponent"] is None:
            notes.append(f"{title} is not extrapolated: {row['reason']}.")
    if not layer(numbers, "size").empty:
        add_legend(page, _legend(numbers))
        notes.insert(0, "Bars: total error; ticks across: statistical error.")
    add_note(page.figure, *notes)
    return page.figure


def _draw_series(axes: Axes, numbers: pd.DataFrame, series: str) -> None:
    colour = look_of_category(0).colour
    curve = layer(numbers, "curve", series).sort_values("abscissa")
    if not curve.empty:
        x = curve["abscissa"]
        for kind, alpha in _BANDS.items():
            ends = curve[f"{kind}_low"], curve[f"{kind}_high"]
            band: dict[str, Any] = {"color": colour, "alpha": alpha, "linewidth": 0, "zorder": 1}
            axes.fill_between(x, *ends, gid=f"{kind}-band:{series}", **band)
        axes.plot(x, curve["exponent"], color=colour, gid=f"curve:{series}", zorder=2)
    for name, style in _POINTS.items():
        points = layer(numbers, name, series)
        if points.empty:
            continue
        x, ink = points["abscissa"], style["color"]
        total, inner = f"{name}-total:{series}", f"{name}-statistical:{series}"
        draw_errors(axes, x, points["total_low"], points["total_high"], ink, total)
        draw_caps(axes, x, points["statistical_low"], points["statistical_high"], ink, inner)
        axes.plot(x, points["exponent"], gid=f"{name}:{series}", zorder=4, **style)


_POINTS: dict[str, dict[str, Any]] = {
    "size": {"color": INK, "marker": "o", "markersize": 2.8, "markeredgewidth": 0, "linestyle": "none"},
    "limit": {
        "color": look_of_category(1).colour,
        "marker": "D",
        "markersize": 3.6,
        "markeredgewidth": 0,
        "linestyle": "none",
    },
}


def _set_axes(axes: Axes, own: pd.DataFrame) -> None:
    sizes = layer(own, "size")
    axes.set_xlabel(inverse_power(float(sizes["omega"].iloc[0])))
    largest = float(sizes["abscissa"].max())
    axes.set_xlim(-ROOM * largest, (1 + ROOM) * largest)
    axes.xaxis.set_major_locator(MaxNLocator(4, steps=[1, 2, 5, 10]))
    axes.yaxis.set_major_locator(MaxNLocator(5, steps=[1, 2, 5, 10]))
    shown = own[["total_low", "total_high", "exponent"]].to_numpy()
    low, high = float(np.nanmin(shown)), float(np.nanmax(shown))
    room = 0.06 * (high - low) or 0.05
    axes.set_ylim(low - room, high + room)


def _label_sizes(axes: Axes, sizes: pd.DataFrame, panel_inches: float) -> None:
    """The sizes along the upper edge; of names that would touch, the largest and the smallest go first."""
    ordered = sizes.sort_values("abscissa")
    positions = [0.0, *ordered["abscissa"]]
    names = [r"$\infty$", *(f"{size:.0f}" for size in ordered["size"])]
    inches = panel_inches / ((1 + 2 * ROOM) * positions[-1])
    labels = [""] * len(names)
    taken: list[tuple[float, float]] = []
    for i in (0, 1, *range(len(names) - 1, 1, -1)):
        half = text_inches(f"{names[i]}0", SMALL_POINTS) / 2
        low, high = positions[i] * inches - half, positions[i] * inches + half
        if all(low >= end or high <= start for start, end in taken):
            labels[i] = names[i]
            taken.append((low, high))
    top = axes.secondary_xaxis("top")
    top.set_xticks(positions, labels)
    top.tick_params(pad=1.5)


def _legend(numbers: pd.DataFrame) -> list[Artist]:
    handles: list[Artist] = [Line2D([], [], label=r"$\alpha(n)$", **_POINTS["size"])]
    if not layer(numbers, "curve").empty:
        colour = look_of_category(0).colour
        # what the two bands look like one above the other
        both = 1 - (1 - _BANDS["total"]) * (1 - _BANDS["statistical"])
        handles += [
            Line2D([], [], color=colour, label="average of scaling fits"),
            Patch(facecolor=colour, alpha=both, linewidth=0, label="statistical error"),
            Patch(facecolor=colour, alpha=_BANDS["total"], linewidth=0, label="total error"),
        ]
    if not layer(numbers, "limit").empty:
        handles.append(Line2D([], [], label=r"$n\to\infty$", **_POINTS["limit"]))
    return [*handles, *expected_handles(numbers)]
