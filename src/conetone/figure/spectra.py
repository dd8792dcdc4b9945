"""Figure `spectra`: mean spectra with the fitted power laws, and the residuals in standard errors."""

from typing import Any

import numpy as np
import pandas as pd
from matplotlib.artist import Artist
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.lines import Line2D
from matplotlib.ticker import FixedLocator, NullFormatter

from conetone.figure.closing import ClosingTables, Operator, Row, layer, of_series
from conetone.figure.labels import ensemble_label, magnitudes_label
from conetone.figure.panels import (
    PLAIN_NUMBERS,
    add_legend,
    add_note,
    log_x,
    log_y,
    new_page,
    no_ticks,
    say,
)
from conetone.figure.style import INK, Look, draw_errors, looks_of_sizes
from conetone.figure.window import draw_window, window_handles, window_rows

# Residuals up to this many standard errors are on a linear scale, larger ones on a logarithmic one.
LINEAR_UP_TO = 5
HEIGHTS = (1.55, 0.62)
COLUMNS = ("layer", "size", "rank", "last_rank", "magnitude", "magnitude_low", "magnitude_high", "residual")


def spectra_numbers(tables: ClosingTables, operator: Operator) -> pd.DataFrame:
    """What the figure draws: layers spectrum, fit, residual, and window at the largest size."""
    rows: list[dict[str, Any]] = []
    for series in tables.series_of(operator):
        keys = tables.keys_of(series)
        rows += [{**keys, **_spectrum(found)} for found in of_series(tables.profiles, series)]
        for found in of_series(tables.bins, series):
            shared = {**keys, "size": found["size"], "rank": found["rank"]}
            if found["fitted"] is not None:
                rows.append({**shared, "layer": "fit", "magnitude": np.exp(found["fitted"])})
            if found["residual"] is not None:
                rows.append({**shared, "layer": "residual", "residual": found["residual"]})
        rows += window_rows(keys, tables.bins)
    return tables.numbers(COLUMNS, rows)


def _spectrum(found: Row) -> dict[str, Any]:
    mean, error = found["log_magnitude"], found["log_magnitude_error"]
    return {
        "layer": "spectrum",
        "size": found["size"],
        "rank": found["rank"],
        "magnitude": np.exp(mean),
        "magnitude_low": np.exp(mean - error),
        "magnitude_high": np.exp(mean + error),
    }


def draw_spectra(numbers: pd.DataFrame, tables: ClosingTables, operator: Operator) -> Figure:
    """Draw `spectra_numbers`, one panel for each series, failed ones too."""
    series = tables.series_of(operator)
    page = new_page([ensemble_label(row, tables.parameters) for row in series], HEIGHTS)
    looks = looks_of_sizes(sorted(set(layer(numbers, "spectrum")["size"])))
    for panel, row in zip(page.panels, series, strict=True):
        above, below = panel.axes
        draw_window(panel.axes, numbers, row["series"])
        for size, look in looks.items():
            _draw_size(panel.axes, numbers, row["series"], size, look)
        if layer(numbers, "spectrum", row["series"]).empty:
            say(page, panel, row["reason"] or "no spectra")
        below.axhline(0, color=INK, linewidth=0.6, zorder=1)
        if panel.outer_bottom:
            below.set_xlabel("rank $r$")
        if panel.outer_left:
            above.set_ylabel(magnitudes_label(operator))
            below.set_ylabel("residual / $\\sigma$")
    if not layer(numbers, "spectrum").empty:
        above, below = page.panels[0].axes
        _scale(above, below, numbers["residual"])
        add_legend(page, _legend(looks, numbers))
    else:
        no_ticks(*(axes for panel in page.panels for axes in panel.axes))
    if not layer(numbers, "residual").empty:
        add_note(
            page.figure,
            "Points: geometric mean over replicates and bins of ranks.",
            _residuals_in_words(tables),
            f"axis linear up to ±{LINEAR_UP_TO}, logarithmic beyond.",
        )
    return page.figure


def _residuals_in_words(tables: ClosingTables) -> str:
    if any(row["estimator"] == "smooth-count" for row in tables.bins):
        return (
            "Residual: (mean − fit) of $\\log\\,\\Lambda$ at smooth ranks over its statistical error"
            " $\\sigma$, at the rank where a power law has $|\\lambda_r| = \\Lambda$;"
        )
    return "Residual: (mean − fit) of $\\log\\,|\\lambda_r|$ over its statistical error $\\sigma$;"


def _draw_size(axes: tuple[Axes, ...], numbers: pd.DataFrame, series: str, size: int, look: Look) -> None:
    above, below = axes
    gid = f"{series}:{size}"
    points: dict[str, Any] = {
        "linestyle": "none",
        "marker": look.marker,
        "markersize": 2.5,
        "markeredgewidth": 0,
        "color": look.colour,
    }
    spectrum = layer(numbers, "spectrum", series, size)
    if not spectrum.empty:
        low, high = spectrum["magnitude_low"], spectrum["magnitude_high"]
        draw_errors(above, spectrum["rank"], low, high, look.colour, f"error:{gid}", width=0.6)
        above.plot(spectrum["rank"], spectrum["magnitude"], gid=f"spectrum:{gid}", **points)
    fit = layer(numbers, "fit", series, size)
    if not fit.empty:
        above.plot(fit["rank"], fit["magnitude"], gid=f"fit:{gid}", zorder=4, **_FIT)
    residual = layer(numbers, "residual", series, size)
    if not residual.empty:
        below.plot(residual["rank"], residual["residual"], gid=f"residual:{gid}", **points)


_FIT: dict[str, Any] = {"color": "black", "linewidth": 0.6}


def _scale(above: Axes, below: Axes, residual: "pd.Series[float]") -> None:
    log_x(below)
    log_y(above)
    largest = float(residual.abs().max()) if residual.notna().any() else 0.0
    limit = max(largest * 1.4, 2.2 * LINEAR_UP_TO)
    below.set_yscale("symlog", linthresh=LINEAR_UP_TO, linscale=0.8)
    below.set_ylim(-limit, limit)
    power = int(np.floor(np.log10(limit)))
    between = [LINEAR_UP_TO, *(10.0**p for p in range(1, power))]
    below.yaxis.set_major_locator(FixedLocator([-(10.0**power), 0, 10.0**power]))
    below.yaxis.set_minor_locator(FixedLocator([sign * tick for tick in between for sign in (-1, 1)]))
    below.yaxis.set_major_formatter(PLAIN_NUMBERS)
    below.yaxis.set_minor_formatter(NullFormatter())


def _legend(looks: dict[int, Look], numbers: pd.DataFrame) -> list[Artist]:
    handles: list[Artist] = [size_handle(size, look) for size, look in looks.items()]
    if not layer(numbers, "fit").empty:
        handles.append(Line2D([], [], label="best fit", **_FIT))
    return [*handles, *window_handles(numbers)]


def size_handle(size: int, look: Look) -> Line2D:
    """Legend entry of one size."""
    marker: dict[str, Any] = {"marker": look.marker, "markersize": 4, "markeredgewidth": 0}
    return Line2D([], [], linestyle="none", color=look.colour, label=f"$n$ = {size}", **marker)
