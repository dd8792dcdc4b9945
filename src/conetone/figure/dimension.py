"""Figure `exponents`: exponents at infinite size against the dimension, beside what theory expects."""

from collections.abc import Iterable, Mapping, Sequence
from typing import Any

import numpy as np
import pandas as pd
from matplotlib.artist import Artist
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.lines import Line2D

from conetone.figure.closing import ClosingTables, Operator, Row, layer
from conetone.figure.extrapolation import ERROR_COLUMNS, with_errors
from conetone.figure.labels import ensemble_label, operator_label, wrapped
from conetone.figure.panels import add_note, legend_above, new_figure, no_ticks
from conetone.figure.style import (
    COLUMN_INCHES,
    INK,
    PAGE_INCHES,
    SMALL_POINTS,
    draw_caps,
    draw_errors,
    expected_dashes,
    look_of_category,
)
from conetone.reference.exponents import null_direction_exponent

COLUMNS = ("layer", "axis", "position", "exponent", *ERROR_COLUMNS, "standing")
HEIGHT = 2.7
STRIP_INCHES = 0.6
# What the tick labels and the label of the y axis take.
MARGIN_INCHES = 0.5
# More points than this need the width of a page.
MOST_IN_A_COLUMN = 16
# Points that share a dimension stand side by side within this width, and so far apart at most.
DODGE = 0.6
MOST_APART = 0.2
CURVE_POINTS = 101
WIDEST_MARK_POINTS = 48.0
CURVE_LABEL = "$d/(2(d-1))$, heuristic"
FILLS = ("full", "open", "left", "top", "right", "bottom")


def exponent_numbers(tables: ClosingTables, operators: Sequence[Operator]) -> pd.DataFrame:
    """What the figure draws: layers exponent, expected (single values) and curve.

    `position` is the place on the axis `dimension`, where it is the dimension with a small shift, or on the
    axis `other` of ensembles that have no dimension.
    """
    chosen = [row for o in operators for row in tables.series_of(o) if row["exponent"] is not None]
    labels = [ensemble_label(row, _others(tables)) for row in chosen]
    strip = _distinct(name for row, name in zip(chosen, labels, strict=True) if row["dimension"] is None)
    places = [_place(row, name, strip) for row, name in zip(chosen, labels, strict=True)]
    curve = _curve_rows(chosen)
    rows: list[dict[str, Any]] = []
    for i, series in enumerate(chosen):
        axis, centre = places[i]
        shift = _shift(places[:i].count(places[i]), places.count(places[i]))
        keys = {**tables.keys_of(series), "axis": axis}
        errors = with_errors(series["exponent"], series["statistical"], series["systematic"])
        rows.append({**keys, "layer": "exponent", "position": centre + shift, **errors})
        if series["expected"] is not None and not (curve and _on_curve(series)):
            expected = {"exponent": series["expected"], "standing": series["expected_standing"]}
            rows.append({**keys, "layer": "expected", "position": centre, **expected})
    return tables.numbers(COLUMNS, [*rows, *curve])


def _place(series: Row, name: str, strip: list[str]) -> tuple[str, float]:
    """Axis and centre of a series: its dimension, or the number of its ensemble among those without one."""
    if series["dimension"] is None:
        return "other", float(strip.index(name))
    return "dimension", float(series["dimension"])


def _others(tables: ClosingTables) -> list[str]:
    """The parameters that are not the axis."""
    return [name for name in tables.parameters if name != "dimension"]


def _distinct(names: Iterable[str]) -> list[str]:
    return list(dict.fromkeys(names))


def _shift(position: int, count: int) -> float:
    return (position - (count - 1) / 2) * min(MOST_APART, DODGE / count)


def _on_curve(series: Row) -> bool:
    return (
        series["expected_standing"] == "heuristic"
        and series["dimension"] is not None
        and abs(series["expected"] - null_direction_exponent(series["dimension"])) < 1e-12
    )


def _curve_rows(chosen: list[Row]) -> list[dict[str, Any]]:
    dimensions = {series["dimension"] for series in chosen if _on_curve(series)}
    if len(dimensions) < 2:
        return []
    shared = {"layer": "curve", "axis": "dimension", "standing": "heuristic"}
    positions = np.linspace(min(dimensions), max(dimensions), CURVE_POINTS)
    return [{**shared, "position": d, "exponent": null_direction_exponent(d)} for d in positions]


def draw_exponents(numbers: pd.DataFrame, tables: ClosingTables, operators: Sequence[Operator]) -> Figure:
    """Draw `exponent_numbers`, and name the series that have no exponent."""
    drawn = layer(numbers, "exponent")
    names = {row["series"]: ensemble_label(row, _others(tables)) for row in tables.exponents}
    flat, other = drawn[drawn["axis"] == "dimension"], drawn[drawn["axis"] == "other"]
    strip = _distinct(names[series] for series in other["series"])
    ensembles = _distinct(names[series] for series in flat["series"])
    fills = {series: FILLS[ensembles.index(names[series]) % len(FILLS)] for series in flat["series"]}
    wide = len(drawn) > MOST_IN_A_COLUMN or len(strip) > 2
    figure = new_figure(PAGE_INCHES if wide else COLUMN_INCHES, HEIGHT)
    main, side, side_inches = _axes(figure, has_flat=not flat.empty, in_strip=len(strip))
    if main is not None:
        dimensions = sorted(set(flat["dimension"]))
        each = (figure.get_figwidth() - MARGIN_INCHES - side_inches) / (dimensions[-1] - dimensions[0] + 1)
        _draw_axis(main, numbers[numbers["axis"] == "dimension"], operators, fills, each)
        main.set_xlabel("spacetime dimension $d$")
        main.set_xticks(dimensions)
        main.set_xlim(dimensions[0] - 0.5, dimensions[-1] + 0.5)
    if side is not None:
        each = side_inches / len(strip)
        _draw_axis(side, numbers[numbers["axis"] == "other"], operators, fills, each)
        _label_strip(side, strip, each)
    if drawn.empty:
        axes = figure.add_subplot()
        no_ticks(axes)
        axes.text(
            0.5, 0.5, "no exponent at infinite size", ha="center", va="center", transform=axes.transAxes
        )
    else:
        figure.axes[0].set_ylabel(r"exponent $\alpha$ at $n\to\infty$")
        legend_above(figure, _legend(numbers, operators, ensembles))
    add_note(figure, *_notes(drawn, tables, operators))
    return figure


def _axes(figure: Figure, *, has_flat: bool, in_strip: int) -> tuple[Axes | None, Axes | None, float]:
    """Axes over the dimension, axes of a strip for what has none, and the width of the strip in inches."""
    whole = figure.get_figwidth() - MARGIN_INCHES
    if not in_strip:
        return (figure.add_subplot() if has_flat else None), None, 0.0
    if not has_flat:
        return None, figure.add_subplot(), whole
    width = min(STRIP_INCHES * in_strip, 0.6 * whole)
    grid = figure.add_gridspec(1, 2, width_ratios=(whole - width, width))
    main = figure.add_subplot(grid[0, 0])
    side = figure.add_subplot(grid[0, 1], sharey=main)
    side.tick_params(labelleft=False)
    return main, side, width


def _draw_axis(
    axes: Axes,
    numbers: pd.DataFrame,
    operators: Sequence[Operator],
    fills: Mapping[str, str],
    unit_inches: float,
) -> None:
    """One axis; a unit of it, a dimension or an ensemble, is about `unit_inches` wide."""
    curve = layer(numbers, "curve")
    if not curve.empty:
        axes.plot(curve["position"], curve["exponent"], gid="curve", zorder=1, **_CURVE)
    for standing, points in layer(numbers, "expected").groupby("standing"):
        mark = _expected_mark(str(standing), min((DODGE + 0.1) * unit_inches * 72, WIDEST_MARK_POINTS))
        axes.plot(points["position"], points["exponent"], gid=f"expected:{standing}", zorder=1.5, **mark)
    names = [(operator.matrix, operator.part) for operator in operators]
    for place, row in layer(numbers, "exponent").iterrows():
        one, series = numbers.loc[[place]], row["series"]
        look = look_of_category(names.index((row["matrix"], row["part"])))
        x, colour = one["position"], look.colour
        draw_errors(axes, x, one["total_low"], one["total_high"], colour, f"total:{series}")
        draw_caps(axes, x, one["statistical_low"], one["statistical_high"], colour, f"statistical:{series}")
        marker = _marker(look.marker, colour, fills.get(series, FILLS[0]))
        axes.plot(x, one["exponent"], gid=f"exponent:{series}", zorder=4, **marker)


_CURVE: dict[str, Any] = {"color": INK, "linewidth": 0.9, "linestyle": expected_dashes("heuristic")}


def _expected_mark(standing: str, points: float) -> dict[str, Any]:
    """A mark this wide, behind the measured ones: bold where the value is exact, grey where it is a guess."""
    looks = {"exact": (1.6, INK), "published": (0.8, INK), "heuristic": (0.8, "0.5")}
    width, colour = looks[standing]
    bar: dict[str, Any] = {"marker": "_", "markersize": points, "linestyle": "none"}
    return {**bar, "markeredgewidth": width, "color": colour}


def _marker(marker: str, colour: Any, fill: str) -> dict[str, Any]:
    """A marker of one of FILLS; an open one is white, not clear, so that nothing shows through."""
    style: dict[str, Any] = {"linestyle": "none", "marker": marker, "color": colour, "markersize": 4.0}
    style |= {"markeredgewidth": 0.8, "markerfacecoloralt": "white"}
    return style | ({"markerfacecolor": "white"} if fill == "open" else {"fillstyle": fill})


def _label_strip(axes: Axes, strip: list[str], each: float) -> None:
    """Names of the ensembles below the strip, `each` inches wide: level if there is room, else sideways."""
    level = each >= 0.9 * STRIP_INCHES
    if level:
        # a double name may break at its dash
        words = [name.replace("–", "– ") for name in strip]
        names = [wrapped(word, 0.92 * each, SMALL_POINTS, lines=8).replace("– ", "–") for word in words]
    else:
        names = [wrapped(name, 1.3, SMALL_POINTS, lines=2) for name in strip]
    axes.set_xticks(range(len(strip)), names, rotation=0 if level else 90)
    axes.tick_params(axis="x", length=0)
    axes.set_xlim(-0.5, len(strip) - 0.5)
    axes.set_xlabel("no dimension")


def _legend(numbers: pd.DataFrame, operators: Sequence[Operator], ensembles: list[str]) -> list[Artist]:
    drawn = layer(numbers, "exponent")
    present = set(zip(drawn["matrix"], drawn["part"], strict=True))
    handles: list[Artist] = []
    for position, operator in enumerate(operators):
        look = look_of_category(position)
        if (operator.matrix, operator.part) in present:
            marker = _marker(look.marker, look.colour, FILLS[0])
            handles.append(Line2D([], [], label=operator_label(operator), **marker))
    if len(ensembles) > 1:
        for position, name in enumerate(ensembles):
            marker = _marker("o", "0.35", FILLS[position % len(FILLS)])
            handles.append(Line2D([], [], label=wrapped(name, 2.6, SMALL_POINTS, lines=2), **marker))
    if not layer(numbers, "curve").empty:
        handles.append(Line2D([], [], label=CURVE_LABEL, **_CURVE))
    standings = sorted(set(layer(numbers, "expected")["standing"]))
    marks = [Line2D([], [], label=f"expected, {each}", **_expected_mark(each, 12)) for each in standings]
    return [*handles, *marks]


def _notes(drawn: pd.DataFrame, tables: ClosingTables, operators: Sequence[Operator]) -> list[str]:
    notes = [] if drawn.empty else ["Bars: total error; ticks across: statistical error."]
    lost = [
        f"{ensemble_label(row, tables.parameters)} ({row['matrix']}, {row['part']})"
        for operator in operators
        for row in tables.series_of(operator)
        if row["exponent"] is None
    ]
    return [*notes, f"Not drawn, because without a value: {'; '.join(lost)}."] if lost else notes
