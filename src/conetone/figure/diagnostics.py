"""Figure `diagnostics`: how an exponent depends on the sizes, the ω and the power of n that are put in."""

from math import log10
from typing import Any

import pandas as pd
from matplotlib.artist import Artist
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.lines import Line2D
from matplotlib.patches import Patch
from matplotlib.ticker import FixedLocator, MaxNLocator, NullFormatter, NullLocator

from conetone.figure.closing import ClosingTables, Operator, layer, of_series
from conetone.figure.expected import draw_expected, expected_handles, expected_rows
from conetone.figure.extrapolation import ERROR_COLUMNS, with_errors
from conetone.figure.labels import ensemble_label, operator_symbol, text_inches
from conetone.figure.panels import Page, Panel, add_note, legend_above, log_x, log_y, new_rows, no_ticks, say
from conetone.figure.style import INK, SHADE, SMALL_POINTS, draw_caps, draw_errors, look_of_category

# Exponents above, χ²/ν below; the quality of the collapse beside them as high as both.
HEIGHTS, WHOLE = (1.15, 0.45), (1.6,)
# Factor left of the smallest size and right of the largest.
ROOM = 1.25
COLUMNS = ("layer", "abscissa", "exponent", *ERROR_COLUMNS, "quality", "standing")
# Kinds of the table that are drawn, by panel.
SIZES, OMEGAS, COLLAPSE = "smallest-size", "omega", "collapse"
# The band of the total error lies below that of the statistical one, and shines through.
BANDS = {"total": 0.3, "statistical": 0.5}
COLOUR = look_of_category(0).colour
QUOTED: dict[str, Any] = {"color": INK, "linewidth": 0.6}
POINTS: dict[str, Any] = {"color": COLOUR, "marker": "o", "markersize": 3.2, "markeredgewidth": 0}
NOTE = (
    "Left, from this size on, bars: total error, ticks across: statistical error; middle, with this $\\omega$"
    " alone; $\\chi^2/\\nu$ of the scaling fits. Right, how well local slopes of all sizes fall onto one"
    " curve of rank over $n^b$, after Houdayer and Hartmann: 1 is as well as errors allow."
)


def diagnostics_numbers(tables: ClosingTables, operator: Operator) -> pd.DataFrame:
    """What the figure draws: layers smallest-size, omega, collapse, and the values quoted and expected."""
    rows: list[dict[str, Any]] = []
    for series in tables.series_of(operator):
        keys = tables.keys_of(series)
        for found in of_series(tables.diagnostics, series):
            if found["kind"] not in (SIZES, OMEGAS, COLLAPSE):
                continue
            row = {**keys, "layer": found["kind"], "abscissa": found["abscissa"], "quality": found["quality"]}
            if found["exponent"] is not None:
                row |= with_errors(found["exponent"], found["statistical"], found["systematic"])
            rows.append(row)
        if series["exponent"] is not None:
            quoted = with_errors(series["exponent"], series["statistical"], series["systematic"])
            rows.append({**keys, "layer": "quoted", **quoted})
            rows += expected_rows(keys, series, "exponent")
    return tables.numbers(COLUMNS, rows)


def draw_diagnostics(numbers: pd.DataFrame, tables: ClosingTables, operator: Operator) -> Figure:
    """Draw `diagnostics_numbers`, one row of panels for each series, failed ones too."""
    series = tables.series_of(operator)
    titles = [ensemble_label(row, tables.parameters) for row in series]
    page = new_rows(titles, (HEIGHTS, HEIGHTS, WHOLE))
    for i, row in enumerate(series):
        sizes, omegas, collapse = page.panels[3 * i : 3 * i + 3]
        own = numbers[(numbers["series"] == row["series"]).to_numpy(dtype=bool)]
        if layer(own, "quoted").empty:
            say(page, sizes, row["reason"] or "no exponent")
            for axes in (*sizes.axes, *omegas.axes):
                axes.set_yticks([])
        else:
            _draw_exponents(sizes, omegas, own, row["series"])
        if layer(own, COLLAPSE).empty:
            say(page, collapse, "slopes of fewer than two sizes")
            collapse.axes[0].set_yticks([])
        else:
            _draw_collapse(collapse, layer(own, COLLAPSE), row["series"])
        _label(sizes, omegas, collapse, operator)
    _set_columns(page, numbers)
    if not numbers.empty:
        if handles := _legend(numbers):
            legend_above(page.figure, handles)
        add_note(page.figure, NOTE)
    else:
        no_ticks(*page.figure.axes)
    return page.figure


def _draw_exponents(sizes: Panel, omegas: Panel, own: pd.DataFrame, series: str) -> None:
    above = (sizes.axes[0], omegas.axes[0])
    _draw_sizes(sizes, layer(own, SIZES), series)
    _draw_omegas(omegas, layer(own, OMEGAS), series)
    shown = own[["total_low", "total_high", "exponent"]]
    low, high = float(shown.min().min()), float(shown.max().max())
    room = 0.06 * (high - low) or 0.05
    for axes in above:
        axes.set_ylim(low - room, high + room)
        axes.yaxis.set_major_locator(MaxNLocator(4, steps=[1, 2, 5, 10]))
        _draw_quoted(axes, layer(own, "quoted"), series)
        draw_expected(axes, own, "exponent", series, in_words=axes is above[-1])
    qualities = own.loc[own["layer"].isin((SIZES, OMEGAS)).to_numpy(dtype=bool), "quality"]
    for panel in (sizes, omegas):
        axes = panel.axes[1]
        axes.axhline(1, color=INK, linewidth=0.5, zorder=1)
        axes.set_ylim(0, 1.15 * max(float(qualities.max()), 1.5))
        axes.yaxis.set_major_locator(MaxNLocator(2, steps=[1, 2, 5, 10]))


def _draw_quoted(axes: Axes, quoted: pd.DataFrame, series: str) -> None:
    for _, row in quoted.iterrows():
        band: dict[str, Any] = {"facecolor": SHADE, "edgecolor": "none", "zorder": 0}
        axes.axhspan(row["total_low"], row["total_high"], gid=f"quoted-total:{series}", **band)
        axes.axhline(row["exponent"], gid=f"quoted:{series}", zorder=1, **QUOTED)


def _draw_sizes(panel: Panel, points: pd.DataFrame, series: str) -> None:
    if points.empty:
        return
    above, below = panel.axes
    x, gid = points["abscissa"], f"{SIZES}-total:{series}"
    draw_errors(above, x, points["total_low"], points["total_high"], COLOUR, gid)
    ends = points["statistical_low"], points["statistical_high"]
    draw_caps(above, x, *ends, COLOUR, f"{SIZES}-statistical:{series}")
    above.plot(x, points["exponent"], linestyle="none", gid=f"{SIZES}:{series}", zorder=4, **POINTS)
    below.plot(x, points["quality"], linewidth=0.5, gid=f"{SIZES}-quality:{series}", zorder=4, **POINTS)


def _draw_omegas(panel: Panel, points: pd.DataFrame, series: str) -> None:
    if points.empty:
        return
    above, below = panel.axes
    x = points["abscissa"]
    for kind, alpha in BANDS.items():
        ends = points[f"{kind}_low"], points[f"{kind}_high"]
        band: dict[str, Any] = {"color": COLOUR, "alpha": alpha, "linewidth": 0, "zorder": 1.2}
        above.fill_between(x, *ends, gid=f"{OMEGAS}-{kind}:{series}", **band)
    above.plot(x, points["exponent"], color=COLOUR, gid=f"{OMEGAS}:{series}", zorder=2)
    below.plot(x, points["quality"], color=COLOUR, gid=f"{OMEGAS}-quality:{series}", zorder=2)


def _draw_collapse(panel: Panel, points: pd.DataFrame, series: str) -> None:
    (axes,) = panel.axes
    log_y(axes)
    axes.axhline(1, color=INK, linewidth=0.5, zorder=1)
    axes.plot(
        points["abscissa"], points["quality"], linewidth=0.6, gid=f"{COLLAPSE}:{series}", zorder=3,
        **{**POINTS, "markersize": 2.2},
    )  # fmt: skip
    # 1 and 10 are always labelled
    low, high = float(points["quality"].min()), float(points["quality"].max())
    axes.set_ylim(min(0.7, low / 1.4), max(14, 1.4 * high))


def _label(sizes: Panel, omegas: Panel, collapse: Panel, operator: Operator) -> None:
    sizes.axes[0].set_ylabel(rf"$\alpha$ of {operator_symbol(operator)}")
    sizes.axes[1].set_ylabel(r"$\chi^2/\nu$")
    collapse.axes[0].set_ylabel("collapse quality $S$")
    for axes in omegas.axes:
        axes.tick_params(labelleft=False)
    if sizes.outer_bottom:
        sizes.axes[-1].set_xlabel("smallest size used")
        omegas.axes[-1].set_xlabel(r"single $\omega$ of $n^{-\omega}$")
        collapse.axes[-1].set_xlabel("power $b$ of $n$")


def _set_columns(page: Page, numbers: pd.DataFrame) -> None:
    """The x axes, which all rows share."""
    used = sorted(set(layer(numbers, SIZES)["abscissa"]))
    if not used:
        for panel in page.panels[::3]:
            panel.axes[0].xaxis.set_major_locator(NullLocator())
        return
    for panel in page.panels[::3]:
        for axes in panel.axes:
            log_x(axes)
            axes.xaxis.set_minor_locator(NullLocator())
            axes.xaxis.set_minor_formatter(NullFormatter())
    first = page.panels[0].axes[0]
    first.set_xlim(used[0] / ROOM, used[-1] * ROOM)
    first.xaxis.set_major_locator(FixedLocator(_apart(used, page.panel_inches)))


def _apart(sizes: list[float], inches: float) -> list[float]:
    """Those of rising sizes whose names do not touch along a logarithmic axis, the smallest first."""
    decade = inches / log10(ROOM**2 * sizes[-1] / sizes[0])
    kept = sizes[:1]
    for size in sizes[1:]:
        if decade * log10(size / kept[-1]) > text_inches(f"{size:g}0", SMALL_POINTS):
            kept.append(size)
    return kept


def _legend(numbers: pd.DataFrame) -> list[Artist]:
    handles: list[Artist] = []
    if not layer(numbers, "quoted").empty:
        # what the two bands look like one above the other
        both = 1 - (1 - BANDS["total"]) * (1 - BANDS["statistical"])
        handles = [
            Line2D([], [], label="exponent quoted", **QUOTED),
            Patch(facecolor=SHADE, edgecolor="none", label="its total error"),
            Line2D([], [], linestyle="none", label="from this size on", **POINTS),
            Line2D([], [], color=COLOUR, label=r"a single $\omega$"),
            Patch(facecolor=COLOUR, alpha=both, linewidth=0, label="statistical error"),
            Patch(facecolor=COLOUR, alpha=BANDS["total"], linewidth=0, label="total error"),
        ]
    return [*handles, *expected_handles(numbers)]
