"""Figure `local-slope`: the exponent that each part of the spectrum would give by itself."""

from typing import Any

import pandas as pd
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.ticker import MaxNLocator

from conetone.figure.closing import ClosingTables, Operator, Row, layer, of_series
from conetone.figure.expected import draw_expected, expected_handles, expected_rows
from conetone.figure.labels import ensemble_label, operator_symbol
from conetone.figure.panels import add_legend, add_note, log_x, new_page, no_ticks, say
from conetone.figure.spectra import size_handle
from conetone.figure.style import Look, draw_errors, looks_of_sizes
from conetone.figure.window import draw_window, window_handles, window_rows

# Slopes beyond are where a spectrum steps or ends, and would flatten the rest.
LOWEST, HIGHEST = -0.2, 2.0
ROOM = 0.1
HEIGHT = 1.6
COLUMNS = ("layer", "size", "rank", "last_rank", "slope", "slope_low", "slope_high", "standing")


def slope_numbers(tables: ClosingTables, operator: Operator) -> pd.DataFrame:
    """What the figure draws: layers slope, expected, and window at the largest size."""
    rows: list[dict[str, Any]] = []
    for series in tables.series_of(operator):
        keys = tables.keys_of(series)
        rows += [
            {**keys, **_slope(found)}
            for found in of_series(tables.profiles, series)
            if found["slope"] is not None and found["slope_error"] is not None
        ]
        rows += expected_rows(keys, series, "slope")
        rows += window_rows(keys, tables.bins)
    return tables.numbers(COLUMNS, rows)


def _slope(found: Row) -> dict[str, Any]:
    return {
        "layer": "slope",
        "size": found["size"],
        "rank": found["slope_rank"],
        "slope": found["slope"],
        "slope_low": found["slope"] - found["slope_error"],
        "slope_high": found["slope"] + found["slope_error"],
    }


def draw_slope(numbers: pd.DataFrame, tables: ClosingTables, operator: Operator) -> Figure:
    """Draw `slope_numbers`, one panel for each series, failed ones too."""
    series = tables.series_of(operator)
    page = new_page([ensemble_label(row, tables.parameters) for row in series], (HEIGHT,), gap=0.12)
    slopes = layer(numbers, "slope")
    looks = looks_of_sizes(sorted(set(slopes["size"])))
    low, high = _limits(numbers)
    for panel, row in zip(page.panels, series, strict=True):
        (axes,) = panel.axes
        axes.set_ylim(low, high)
        axes.yaxis.set_major_locator(MaxNLocator(5, steps=[1, 2, 5, 10]))
        draw_window(panel.axes, numbers, row["series"])
        draw_expected(axes, numbers, "slope", row["series"])
        for size, look in looks.items():
            _draw_size(axes, numbers, row["series"], size, look)
        if layer(numbers, "slope", row["series"]).empty:
            say(page, panel, row["reason"] or "no spectra")
        if panel.outer_bottom:
            axes.set_xlabel("rank $r$")
        if panel.outer_left:
            axes.set_ylabel(r"local slope $-\mathrm{d}\,\log\,|\lambda_r|\,/\,\mathrm{d}\,\log r$")
    if not slopes.empty:
        log_x(page.panels[0].axes[0])
        sizes = [size_handle(size, look) for size, look in looks.items()]
        add_legend(page, [*sizes, *window_handles(numbers), *expected_handles(numbers)])
        add_note(
            page.figure, f"Spectra of {operator_symbol(operator)}; bars: statistical error.", _hidden(slopes)
        )
    else:
        no_ticks(*(axes for panel in page.panels for axes in panel.axes))
    return page.figure


def _draw_size(axes: Axes, numbers: pd.DataFrame, series: str, size: int, look: Look) -> None:
    points = layer(numbers, "slope", series, size)
    if points.empty:
        return
    rank = points["rank"]
    draw_errors(
        axes,
        rank,
        points["slope_low"],
        points["slope_high"],
        look.colour,
        f"error:{series}:{size}",
        width=0.6,
    )
    axes.plot(
        rank,
        points["slope"],
        linewidth=0.4,
        marker=look.marker,
        markersize=2.4,
        markeredgewidth=0,
        color=look.colour,
        gid=f"slope:{series}:{size}",
    )


def _limits(numbers: pd.DataFrame) -> tuple[float, float]:
    """Limits of the slope axis: all that is drawn and some room, but never beyond what is worth showing."""
    drawn = numbers["slope"].dropna()
    if drawn.empty:
        return LOWEST, HIGHEST
    return max(float(drawn.min()) - ROOM, LOWEST), min(float(drawn.max()) + ROOM, HIGHEST)


def _hidden(slopes: pd.DataFrame) -> str:
    hidden = int(((slopes["slope"] < LOWEST) | (slopes["slope"] > HIGHEST)).sum())
    return f"{hidden} of {len(slopes)} slopes lie beyond the axis." if hidden else ""
