"""The exponent that theory expects, drawn and labelled with its standing in the same way everywhere."""

from typing import Any

import pandas as pd
from matplotlib.axes import Axes
from matplotlib.lines import Line2D

from conetone.figure.closing import Row, layer
from conetone.figure.style import INK, SMALL_POINTS, expected_dashes


def expected_rows(keys: Row, series: Row, column: str) -> list[dict[str, Any]]:
    """The expected exponent of a row of `exponents` as layer `expected`; nothing where none is known."""
    if series["expected"] is None:
        return []
    standing = series["expected_standing"]
    return [{**keys, "layer": "expected", column: series["expected"], "standing": standing}]


def draw_expected(
    axes: Axes, numbers: pd.DataFrame, column: str, series: str, *, in_words: bool = True
) -> None:
    """A dashed line at the expected exponent, its standing written outside, where no data can be.

    The limits of the y axis must be final. Not `in_words` is for a panel beside another that says it.
    """
    low, high = axes.get_ylim()
    for _, row in layer(numbers, "expected", series).iterrows():
        value, standing = float(row[column]), str(row["standing"])
        axes.axhline(value, gid=f"expected:{series}", zorder=1.5, **standing_line(standing))
        if not in_words:
            continue
        place = min(max((value - low) / (high - low), 0.0), 1.0)
        # near an end of the axis the word leans inwards, so that it stays beside its own panel
        align = "bottom" if place < 0.3 else "top" if place > 0.7 else "center"
        axes.annotate(
            standing,
            (1.0, place),
            (2.0, 0.0),
            xycoords="axes fraction",
            textcoords="offset points",
            rotation=90,
            ha="left",
            va=align,
            fontsize=SMALL_POINTS,
        )


def expected_handles(numbers: pd.DataFrame) -> list[Line2D]:
    """Legend entries of the standings that occur."""
    standings = sorted(set(layer(numbers, "expected")["standing"]))
    return [
        Line2D([], [], label=f"expected, {standing}", **standing_line(standing)) for standing in standings
    ]


def standing_line(standing: str) -> dict[str, Any]:
    """The look of a line that theory of this standing gives."""
    return {"color": INK, "linewidth": 0.8, "linestyle": expected_dashes(standing)}
