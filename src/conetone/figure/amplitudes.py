"""Figure `amplitudes`: cut-offs at infinite size times ρ^α, constant for a power law, and the law."""

from typing import Any

import pandas as pd
from matplotlib.artist import Artist
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.lines import Line2D
from matplotlib.ticker import LogLocator, MaxNLocator, NullLocator

from conetone.figure.closing import ClosingTables, Operator, Row, layer, of_series
from conetone.figure.expected import standing_line
from conetone.figure.extrapolation import ERROR_COLUMNS
from conetone.figure.labels import ensemble_label, operator_symbol
from conetone.figure.panels import PLAIN_NUMBERS, add_legend, add_note, new_page, no_ticks, say
from conetone.figure.style import draw_caps, draw_errors, look_of_category

HEIGHT = 1.5
COLUMNS = ("layer", "smooth_rank", "power", "scaled", *ERROR_COLUMNS, "standing")
POINTS: dict[str, Any] = {
    "color": look_of_category(0).colour,
    "marker": "o",
    "markersize": 3.2,
    "markeredgewidth": 0,
    "linestyle": "none",
}
NOTE = (
    "Cut-offs $\\Lambda$ where the smooth count of the spectrum is $\\rho$, extrapolated to infinite size in"
    " $1/n$; $\\alpha$ as expected, or as measured where nothing is. Bars: total error; ticks across:"
    " statistical error."
)


def amplitudes_numbers(tables: ClosingTables, operator: Operator) -> pd.DataFrame:
    """What the figure draws: layers cutoff and law, times smooth_rank^power; power is the exponent α."""
    rows: list[dict[str, Any]] = []
    for series in tables.series_of(operator):
        power = _power(series)
        if power is None:
            continue
        for found in of_series(tables.amplitudes, series):
            factor = float(found["smooth_rank"] ** power)
            keys = {**tables.keys_of(series), "smooth_rank": found["smooth_rank"], "power": power}
            rows.append({**keys, "layer": "cutoff", **_scaled(found, factor)})
            if found["law"] is not None:
                law = {"scaled": found["law"] * factor, "standing": found["law_standing"]}
                rows.append({**keys, "layer": "law", **law})
    return tables.numbers(COLUMNS, rows)


def _power(series: Row) -> float | None:
    """The expected exponent, else the measured one."""
    expected: float | None = series["expected"]
    measured: float | None = series["exponent"]
    return measured if expected is None else expected


def _scaled(found: Row, factor: float) -> dict[str, float]:
    value, statistical = found["cutoff"], found["statistical"]
    total = float((statistical**2 + found["systematic"] ** 2) ** 0.5)
    ends = (value - statistical, value + statistical, value - total, value + total)
    scaled = dict(zip(ERROR_COLUMNS, (factor * end for end in ends), strict=True))
    return {"scaled": factor * value, **scaled}


def draw_amplitudes(numbers: pd.DataFrame, tables: ClosingTables, operator: Operator) -> Figure:
    """Draw `amplitudes_numbers`, one panel for each series, failed ones too."""
    series = tables.series_of(operator)
    page = new_page([_title(row, tables) for row in series], (HEIGHT,), common_axes=False, gap=0.14)
    for panel, row in zip(page.panels, series, strict=True):
        (axes,) = panel.axes
        if panel.outer_left:
            axes.set_ylabel(rf"$\rho^{{\alpha}}\,\Lambda/n$ of {operator_symbol(operator)}")
        own = numbers[(numbers["series"] == row["series"]).to_numpy(dtype=bool)]
        if own.empty:
            no_ticks(axes)
            say(page, panel, row["reason"] or "no smooth rank that three sizes reach")
            continue
        _draw_series(axes, own, row["series"])
        if panel.outer_bottom:
            axes.set_xlabel(r"smooth rank $\rho$")
    if not numbers.empty:
        add_legend(page, _legend(numbers))
        add_note(page.figure, NOTE)
    return page.figure


def _title(series: Row, tables: ClosingTables) -> str:
    label, power = ensemble_label(series, tables.parameters), _power(series)
    return label if power is None else f"{label}; $\\alpha$ = {power:.3g}".replace("$ = ", "$\u00a0=\u00a0")


def _draw_series(axes: Axes, own: pd.DataFrame, series: str) -> None:
    cutoffs, law = layer(own, "cutoff"), layer(own, "law")
    x, colour = cutoffs["smooth_rank"], POINTS["color"]
    draw_errors(axes, x, cutoffs["total_low"], cutoffs["total_high"], colour, f"cutoff-total:{series}")
    ends = cutoffs["statistical_low"], cutoffs["statistical_high"]
    draw_caps(axes, x, *ends, colour, f"cutoff-statistical:{series}")
    axes.plot(x, cutoffs["scaled"], gid=f"cutoff:{series}", zorder=4, **POINTS)
    for standing, line in law.groupby("standing"):
        look = standing_line(str(standing))
        axes.plot(line["smooth_rank"], line["scaled"], gid=f"law:{series}", zorder=1.5, **look)
    # smooth ranks stand two an octave
    axes.set_xscale("log", base=2)
    axes.xaxis.set_major_locator(LogLocator(base=2))
    axes.xaxis.set_major_formatter(PLAIN_NUMBERS)
    axes.xaxis.set_minor_locator(NullLocator())
    axes.set_xlim(float(x.min()) / 1.2, float(x.max()) * 1.2)
    shown = own[["total_low", "total_high", "scaled"]]
    low, high = float(shown.min().min()), float(shown.max().max())
    room = 0.06 * (high - low) or 0.05 * high
    axes.set_ylim(low - room, high + room)
    axes.yaxis.set_major_locator(MaxNLocator(5, steps=[1, 2, 5, 10]))


def _legend(numbers: pd.DataFrame) -> list[Artist]:
    standings = sorted(set(layer(numbers, "law")["standing"]))
    laws = [Line2D([], [], label=f"law, {each}", **standing_line(each)) for each in standings]
    return [Line2D([], [], label=r"$n\to\infty$", **POINTS), *laws]
