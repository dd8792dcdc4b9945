"""A page of panels, one for each series, with one legend and small print; nothing overlaps.

A figure grows with its legend, its notes and the lines of its titles, so that the panels keep their size.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

from matplotlib.artist import Artist
from matplotlib.axes import Axes
from matplotlib.axis import Axis
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure
from matplotlib.layout_engine import ConstrainedLayoutEngine
from matplotlib.legend import Legend
from matplotlib.ticker import LogLocator, NullFormatter, StrMethodFormatter

from conetone.figure.labels import wrapped
from conetone.figure.style import COLUMN_INCHES, FONT_POINTS, PAGE_INCHES, SMALL_POINTS

PLAIN_NUMBERS = StrMethodFormatter("{x:g}")
# What tick labels and the axis label take from the width or the height of a panel.
_MARGIN_INCHES = 0.5
_LINE_INCHES = 1.25 * FONT_POINTS / 72
_MOST_TITLE_LINES = 6
_MOST_NOTE_LINES = 12


@dataclass(frozen=True)
class Panel:
    """The axes of one series, from top to bottom; `outer_left` and `outer_bottom` tell where labels go."""

    axes: tuple[Axes, ...]
    outer_left: bool
    outer_bottom: bool


@dataclass(frozen=True)
class Page:
    """A figure with its panels, each so wide; `free_cell` is the first cell of the grid without a panel."""

    figure: Figure
    panels: tuple[Panel, ...]
    panel_inches: float
    free_cell: Any


def new_figure(width: float, height: float, gap: float = 0.06) -> Figure:
    """An empty figure of this size in inches, laid out so that nothing overlaps; `gap` parts its columns."""
    layout = ConstrainedLayoutEngine(w_pad=gap / 2, h_pad=0.03, wspace=0.0, hspace=0.0)
    figure = Figure(figsize=(width, height), layout=layout)
    FigureCanvasAgg(figure)
    return figure


def columns_of(count: int) -> int:
    """Columns that keep so many panels readable at the width of a page."""
    for most, columns in ((3, max(count, 1)), (4, 2), (6, 3), (8, 4), (9, 3)):
        if count <= most:
            return columns
    return 4


def new_page(
    titles: Sequence[str], heights: Sequence[float], *, common_axes: bool = True, gap: float = 0.06
) -> Page:
    """A page of one panel for each title, a stack of axes with these heights in inches and one x axis.

    `gap` inches part the columns. With `common_axes` all panels have the same axes, and tick labels stand
    only at the left and below.
    """
    count, stack = len(titles), len(heights)
    columns = columns_of(count)
    rows = -(-max(count, 1) // columns)
    width = COLUMN_INCHES if columns == 1 else PAGE_INCHES
    inches = width / columns - (gap + 0.1 if common_axes else gap + _MARGIN_INCHES)
    wrapped_titles = [wrapped(title, inches, FONT_POINTS, _MOST_TITLE_LINES) for title in titles]
    title_lines = [
        max((title.count("\n") + 1 for title in wrapped_titles[row * columns :][:columns]), default=1)
        for row in range(rows)
    ]
    margins = _MARGIN_INCHES if common_axes else rows * _MARGIN_INCHES
    height = rows * (sum(heights) + 0.1 * stack) + sum(title_lines) * _LINE_INCHES + margins
    figure = new_figure(width, height, gap)
    grid = figure.add_gridspec(rows * stack, columns, height_ratios=list(heights) * rows)
    panels: list[Panel] = []
    for position, title in enumerate(wrapped_titles):
        row, column = divmod(position, columns)
        outer_bottom = position + columns >= count
        made: list[Axes] = []
        for level in range(stack):
            first = panels[0].axes[level] if panels and common_axes else None
            cell = grid[row * stack + level, column]
            axes = figure.add_subplot(cell, sharex=first or (made[0] if made else None), sharey=first)
            lowest = level == stack - 1 and (outer_bottom or not common_axes)
            axes.tick_params(labelbottom=lowest, labelleft=column == 0 or not common_axes)
            made.append(axes)
        made[0].set_title(title)
        panels.append(Panel(tuple(made), column == 0, outer_bottom))
    if not panels:
        _say_no_series(figure, grid[:, 0])
    free = count % columns
    free_cell = grid[(rows - 1) * stack :, free] if free else None
    return Page(figure, tuple(panels), inches, free_cell)


def new_rows(titles: Sequence[str], stacks: Sequence[Sequence[float]]) -> Page:
    """A page of one row for each title, as wide as print allows: a panel for each of the stacks of axes.

    A stack is as many heights in inches as the longest one, or one axes beside it. Panels come row by row;
    those of a column have a common x axis, with tick labels below the last row.
    """
    count, levels = len(titles), max(map(len, stacks))
    heights = next(stack for stack in stacks if len(stack) == levels)
    wrapped_titles = [wrapped(title, 0.95 * PAGE_INCHES, FONT_POINTS, _MOST_TITLE_LINES) for title in titles]
    lines = sum(title.count("\n") + 1 for title in wrapped_titles)
    rows = max(count, 1)
    height = rows * (sum(heights) + 0.1 * levels) + lines * _LINE_INCHES + _MARGIN_INCHES
    figure = new_figure(PAGE_INCHES, height, gap=0.12)
    grid = figure.add_gridspec(rows * levels, len(stacks), height_ratios=list(heights) * rows)
    panels: list[Panel] = []
    for row, title in enumerate(wrapped_titles):
        for column, stack in enumerate(stacks):
            cells = [grid[row * levels + i, column] for i in range(levels)]
            if len(stack) == 1:
                cells = [grid[row * levels : (row + 1) * levels, column]]
            made: list[Axes] = []
            for cell in cells:
                first = panels[column].axes[0] if panels[column:] else None
                made.append(figure.add_subplot(cell, sharex=first or (made[0] if made else None)))
                lowest = len(made) == len(cells) and row == count - 1
                made[-1].tick_params(labelbottom=lowest)
            if column == len(stacks) // 2:
                made[0].set_title(title)
            panels.append(Panel(tuple(made), column == 0, row == count - 1))
    if not panels:
        _say_no_series(figure, grid[:, :])
    return Page(figure, tuple(panels), PAGE_INCHES / len(stacks) - _MARGIN_INCHES, None)


def _say_no_series(figure: Figure, cell: Any) -> None:
    empty = figure.add_subplot(cell)
    no_ticks(empty)
    empty.text(0.5, 0.5, "no series", ha="center", va="center", transform=empty.transAxes)


def log_x(axes: Axes) -> None:
    """A logarithmic x axis."""
    axes.set_xscale("log")
    _set_log_ticks(axes.xaxis)


def log_y(axes: Axes) -> None:
    """A logarithmic y axis."""
    axes.set_yscale("log")
    _set_log_ticks(axes.yaxis)


def _set_log_ticks(axis: Axis) -> None:
    """Ticks read 1, 10, 100; small ones stand at 2 and 5, for all of 2 to 9 take most of the drawing time."""
    axis.set_major_formatter(PLAIN_NUMBERS)
    axis.set_minor_locator(LogLocator(subs=(2, 5)))
    axis.set_minor_formatter(NullFormatter())


def no_ticks(*all_axes: Axes) -> None:
    """Nothing along the axes of panels that have nothing to draw."""
    for axes in all_axes:
        axes.set(xticks=[], yticks=[])


def say(page: Page, panel: Panel, text: str) -> None:
    """Words in the middle of a panel that has nothing to draw."""
    words = wrapped(text, page.panel_inches * 0.9, SMALL_POINTS, lines=6)
    axes = panel.axes[0]
    axes.text(0.5, 0.5, words, ha="center", va="center", transform=axes.transAxes, fontsize=SMALL_POINTS)


def add_legend(page: Page, handles: Sequence[Artist]) -> Legend:
    """One legend: in the free cell if it fits there, else above the panels in as many columns as fit."""
    if page.free_cell is not None:
        blank = page.figure.add_subplot(page.free_cell)
        blank.set_axis_off()
        legend = blank.legend(handles=list(handles), loc="center")
        # before the layout a cell is as large as the grid alone makes it, which is close enough
        if _fits(legend, blank.bbox.width * 1.1, blank.bbox.height * 1.1):
            return legend
        blank.remove()
    return legend_above(page.figure, handles)


def legend_above(figure: Figure, handles: Sequence[Artist]) -> Legend:
    """A legend above everything, in as many columns as fit; the figure grows by it."""
    for columns in range(len(handles), 0, -1):
        legend = _legend_of_columns(figure, handles, columns)
        if columns == 1 or _fits(legend, figure.bbox.width * 0.97, figure.bbox.height):
            break
        legend.remove()
    _grow(figure, legend.get_window_extent().height / figure.dpi)
    return legend


def _legend_of_columns(figure: Figure, handles: Sequence[Artist], columns: int) -> Legend:
    # matplotlib fills a legend column by column; reading goes along rows
    ordered = [handle for column in range(columns) for handle in handles[column::columns]]
    return figure.legend(handles=ordered, loc="outside upper center", ncols=columns)


def _fits(legend: Legend, width: float, height: float) -> bool:
    box = legend.get_window_extent()
    return box.width <= width and box.height <= height


def add_note(figure: Figure, *sentences: str) -> None:
    """Small print below the figure, one paragraph; empty sentences say nothing. The figure grows by it."""
    text = " ".join(sentence for sentence in sentences if sentence)
    if text:
        words = wrapped(text, figure.get_figwidth() - 0.2, SMALL_POINTS, _MOST_NOTE_LINES)
        figure.supxlabel(words, fontsize=SMALL_POINTS, x=0.02, ha="left")
        _grow(figure, (words.count("\n") + 1) * _LINE_INCHES)


def _grow(figure: Figure, inches: float) -> None:
    width, height = figure.get_size_inches()
    figure.set_size_inches(width, height + inches)
