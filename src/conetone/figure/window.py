"""The shaded fit window, the same in every figure that shows ranks."""

from collections.abc import Sequence
from typing import Any

import pandas as pd
from matplotlib.axes import Axes
from matplotlib.patches import Patch

from conetone.figure.closing import Row, layer, of_series
from conetone.figure.style import SHADE, shade_patch


def window_rows(keys: Row, bins: Sequence[Row]) -> list[dict[str, Any]]:
    """The fit window of a series at its largest fitted size, as layer `window`; nothing without a fit."""
    fitted = [row for row in of_series(bins, keys) if row["fitted"] is not None]
    if not fitted:
        return []
    size = max(row["size"] for row in fitted)
    largest = [row for row in fitted if row["size"] == size]
    # a smooth count is shown at the rank of the same eigenvalue, and ends where its points do
    smooth = largest[0]["estimator"] == "smooth-count"
    first = min(row["rank" if smooth else "first_rank"] for row in largest)
    last = max(row["rank" if smooth else "last_rank"] for row in largest)
    return [{**keys, "layer": "window", "size": size, "rank": first, "last_rank": last}]


def draw_window(all_axes: Sequence[Axes], numbers: pd.DataFrame, series: str) -> None:
    """Shade the fit window of one series, from its first to its last rank."""
    for _, window in layer(numbers, "window", series).iterrows():
        for axes in all_axes:
            axes.axvspan(
                window["rank"],
                window["last_rank"],
                facecolor=SHADE,
                edgecolor="none",
                zorder=0,
                gid=f"window:{series}",
            )


def window_handles(numbers: pd.DataFrame) -> list[Patch]:
    """Legend entry of the windows, saying at which size they are shown; none where none are shown."""
    sizes = sorted(set(layer(numbers, "window")["size"]))
    if not sizes:
        return []
    return [
        shade_patch(f"fit window at $n$ = {sizes[0]}" if len(sizes) == 1 else "fit window at largest $n$")
    ]
