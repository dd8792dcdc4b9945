"""Runs the stage in a folder, and keeps the figures it drew beside the files it wrote."""

import math
from collections.abc import Iterable, Iterator
from contextlib import chdir
from dataclasses import dataclass, field
from pathlib import Path

import pandas as pd
import pytest
from matplotlib.artist import Artist
from matplotlib.figure import Figure
from matplotlib.text import Text

from conetone.stages import figure as stage
from conetone.sweep.points import OperatorChoice
from conetone.sweep.requests import FigureRequest

from .tables import Rows, write_tables

WORDS = ("series", "ensemble", "count", "matrix", "part", "layer", "axis", "standing")


def _number(text: str) -> float:
    return float(text) if text else math.nan


@dataclass
class Drawn:
    """What one run of the stage made: files in `folder`, figures by name."""

    folder: Path
    rows: Rows
    operators: tuple[OperatorChoice, ...]
    figures: dict[str, Figure] = field(default_factory=dict)

    def csv(self, name: str) -> pd.DataFrame:
        """The CSV beside a figure; Python's own `float` reads every digit back."""
        path = self.folder / "figures" / f"{name}.csv"
        words = pd.read_csv(path, dtype=str, keep_default_na=False)
        return words.apply(lambda column: column if column.name in WORDS else column.map(_number))

    def table(self, name: str) -> pd.DataFrame:
        return pd.read_parquet(self.folder / f"{name}.parquet")


def draw(folder: Path, rows: Rows, operators: Iterable[OperatorChoice]) -> Drawn:
    drawn = Drawn(folder, rows, tuple(operators))
    write_tables(folder, rows)
    write = stage.write_figure

    def keep(stem: Path, figure: Figure, numbers: pd.DataFrame) -> None:
        write(stem, figure, numbers)
        drawn.figures[stem.name] = figure

    with chdir(folder), pytest.MonkeyPatch.context() as patch:
        patch.setattr(stage, "write_figure", keep)
        stage.draw_figures(FigureRequest(drawn.operators))
    return drawn


def artists(figure: Figure) -> dict[str, list[Artist]]:
    """Every artist that carries data, by the name that the figure gave it."""
    found: dict[str, list[Artist]] = {}
    for axes in figure.axes:
        for artist in axes.get_children():
            if artist.get_gid():
                found.setdefault(str(artist.get_gid()), []).append(artist)
    return found


def texts(figure: Figure) -> Iterator[Text]:
    """Every text that is visible in a figure."""
    yield from figure.texts
    legends = [*figure.legends, *(axes.get_legend() for axes in figure.axes)]
    for legend in legends:
        yield from legend.get_texts() if legend else ()
    children = [child for axes in figure.axes for child in axes.child_axes]
    for axes in [*figure.axes, *children]:
        if not axes.axison:
            continue
        yield from [axes.title, *axes.texts]
        for axis in (axes.xaxis, axes.yaxis):
            yield from [axis.label, axis.get_offset_text()]
            low, high = sorted(axis.get_view_interval())
            for tick in [*axis.get_major_ticks(), *axis.get_minor_ticks()]:
                if low <= tick.get_loc() <= high:
                    yield from (label for label in (tick.label1, tick.label2) if label.get_visible())
