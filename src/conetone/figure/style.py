"""How figures look: theme, colours, markers, error bars, page widths."""

from collections.abc import Sequence
from contextlib import AbstractContextManager
from dataclasses import dataclass
from typing import Any

import matplotlib.style
import seaborn as sns
from matplotlib.axes import Axes
from matplotlib.patches import Patch

# Widths of one column and of a page in print: 86 mm and 178 mm.
COLUMN_INCHES = 86 / 25.4
PAGE_INCHES = 178 / 25.4
FONT_POINTS = 8.0
SMALL_POINTS = 7.0
DOTS_AN_INCH = 200

INK = "0.15"
SHADE = "0.90"
MARKERS = ("o", "s", "^", "D", "v", "P", "X", "<", ">", "p", "*", "h")
# Width of the ticks across an error bar that mark the statistical error, in points.
CAP_POINTS = 6.5

_LINE_WIDTHS = ("axes.linewidth", "xtick.major.width", "ytick.major.width")
_THIN_LINE_WIDTHS = ("xtick.minor.width", "ytick.minor.width")


def theme() -> AbstractContextManager[None]:
    """The look of all figures; a reader's own matplotlib settings do not enter."""
    inks = ("axes.edgecolor", "axes.labelcolor", "text.color", "xtick.color", "ytick.color")
    small = ("xtick.labelsize", "ytick.labelsize", "legend.fontsize", "legend.title_fontsize")
    settings: dict[str, Any] = {
        **sns.axes_style("ticks"),
        **sns.plotting_context("paper"),
        # bundled with matplotlib, so that every machine draws the same letters
        "font.family": ["STIXGeneral", "DejaVu Sans"],
        "mathtext.fontset": "stix",
        **dict.fromkeys(("font.size", "axes.labelsize", "axes.titlesize"), FONT_POINTS),
        **dict.fromkeys(small, SMALL_POINTS),
        **dict.fromkeys(inks, INK),
        **dict.fromkeys(_LINE_WIDTHS, 0.6),
        **dict.fromkeys(_THIN_LINE_WIDTHS, 0.4),
        **dict.fromkeys(("xtick.direction", "ytick.direction"), "in"),
        **dict.fromkeys(("xtick.major.size", "ytick.major.size"), 3.0),
        **dict.fromkeys(("xtick.minor.size", "ytick.minor.size"), 1.6),
        "axes.titlepad": 3.5,
        "axes.labelpad": 2.0,
        "axes.formatter.limits": (-3, 4),
        "axes.formatter.use_mathtext": True,
        "legend.frameon": False,
        "legend.handlelength": 1.8,
        "legend.columnspacing": 1.2,
        "legend.handletextpad": 0.5,
        "legend.borderpad": 0.4,
        "legend.labelspacing": 0.35,
        "lines.linewidth": 0.9,
        # letters stay letters in the PDF
        "pdf.fonttype": 42,
        "savefig.dpi": DOTS_AN_INCH,
        "figure.dpi": DOTS_AN_INCH,
    }
    return matplotlib.style.context(["default", settings])


@dataclass(frozen=True)
class Look:
    """Colour and marker of one set of points."""

    colour: Any
    marker: str


def looks_of_sizes(sizes: Sequence[int]) -> dict[int, Look]:
    """Light to dark with growing size, which reads in grey too, and a marker each."""
    # of two colours the darker ones, so that a single size is not pale
    colours = sns.color_palette("crest", max(len(sizes), 2))[-len(sizes) :]
    return {size: Look(colours[i], MARKERS[i % len(MARKERS)]) for i, size in enumerate(sizes)}


def look_of_category(position: int) -> Look:
    """One of several unordered things, such as operators."""
    colours = [sns.color_palette("colorblind")[i] for i in (0, 3, 2, 4, 7, 5)]
    return Look(colours[position % len(colours)], MARKERS[position % len(MARKERS)])


def expected_dashes(standing: str) -> Any:
    """Dashes of an expected exponent; print without colour keeps the standings apart."""
    dashes = {"exact": (0, (7, 2)), "published": (0, (4, 1.5, 1, 1.5)), "heuristic": (0, (2.5, 2))}
    return dashes[standing]


def shade_patch(label: str) -> Patch:
    """Legend entry of a shaded window."""
    return Patch(facecolor=SHADE, edgecolor="none", label=label)


def draw_errors(axes: Axes, x: Any, low: Any, high: Any, colour: Any, gid: str, width: float = 0.9) -> None:
    """Vertical error bars from `low` to `high`.

    The ends are drawn as given, not as a sum of value and error, so that they equal the table's numbers.
    """
    axes.vlines(x, low, high, colors=[colour], linewidth=width, zorder=2.5).set_gid(gid)


def draw_caps(axes: Axes, x: Any, low: Any, high: Any, colour: Any, gid: str) -> None:
    """Ticks across an error bar at `low` and `high`."""
    for end, name in ((low, "low"), (high, "high")):
        axes.plot(
            x,
            end,
            linestyle="none",
            marker="_",
            markersize=CAP_POINTS,
            markeredgewidth=0.9,
            color=colour,
            gid=f"{gid}:{name}",
            zorder=3,
        )
