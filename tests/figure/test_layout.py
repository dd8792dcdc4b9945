"""Figures read well in print: widths, letters of at least 7 points, nothing outside, nothing over another."""

from itertools import combinations

import pytest
from matplotlib.figure import Figure
from matplotlib.transforms import Bbox

from conetone.sweep.paths import FIGURE_KINDS

from .conftest import STEEP
from .drawing import Drawn, texts

COLUMN, PAGE = 86, 178
# What the eye does not see, in pixels of a 200th of an inch.
TOLERANCE = 1.5


def boxes(figure: Figure) -> list[tuple[str, Bbox]]:
    """Text and place of everything that is written."""
    written = [text for text in texts(figure) if text.get_visible() and text.get_text().strip()]
    return [(text.get_text(), text.get_window_extent()) for text in written]


def overlap(one: Bbox, other: Bbox) -> bool:
    both = Bbox.intersection(one, other)
    return both is not None and both.width > TOLERANCE and both.height > TOLERANCE


def test_widths_are_those_of_print(any_drawn: Drawn) -> None:
    widths = {round(figure.get_figwidth() * 25.4) for figure in any_drawn.figures.values()}
    assert widths <= {COLUMN, PAGE}


def test_letters_are_large_enough(any_drawn: Drawn) -> None:
    for name, figure in any_drawn.figures.items():
        sizes = [text.get_fontsize() for text in texts(figure) if text.get_text().strip()]
        assert min(sizes) >= 7, name


def test_nothing_is_written_outside(any_drawn: Drawn) -> None:
    for name, figure in any_drawn.figures.items():
        for text, box in boxes(figure):
            assert box.x0 > -TOLERANCE, (name, text)
            assert box.y0 > -TOLERANCE, (name, text)
            assert box.x1 < figure.bbox.x1 + TOLERANCE, (name, text)
            assert box.y1 < figure.bbox.y1 + TOLERANCE, (name, text)


def test_no_text_is_on_another(any_drawn: Drawn) -> None:
    for name, figure in any_drawn.figures.items():
        for (one, first), (other, second) in combinations(boxes(figure), 2):
            assert not overlap(first, second), (name, one, other)


def test_no_text_is_on_a_panel(any_drawn: Drawn) -> None:
    """Words stand beside the panels, those apart that say why a panel is empty."""
    for name, figure in any_drawn.figures.items():
        panels = [axes for axes in figure.axes if axes.axison]
        inside = {text.get_text() for axes in panels for text in axes.texts if text.get_rotation() == 0}
        for text, box in boxes(figure):
            for axes in panels:
                assert text in inside or not overlap(box, axes.bbox), (name, text)


def test_no_two_panels_touch(any_drawn: Drawn) -> None:
    for name, figure in any_drawn.figures.items():
        for one, other in combinations([axes for axes in figure.axes if axes.axison], 2):
            assert not overlap(one.bbox, other.bbox), name
            assert min(one.bbox.width, one.bbox.height) > 0.4 * figure.dpi


def test_steps_do_not_flatten_the_slopes(crowd: Drawn) -> None:
    """The axis ends where it is said to; what lies beyond is counted below the figure."""
    figure, csv = (
        crowd.figures["local-slope-causal-antisymmetric"],
        crowd.csv("local-slope-causal-antisymmetric"),
    )
    panels = [axes for axes in figure.axes if axes.axison]
    assert {axes.get_ylim() for axes in panels} == {(-0.2, 2.0)}
    slopes = csv["slope"][csv.layer == "slope"]
    assert set(STEEP) < set(slopes)
    note = " ".join(text.get_text() for text in figure.texts)
    assert f"{len(STEEP)} of {len(slopes)} slopes lie beyond the axis." in note


@pytest.mark.parametrize("kind", FIGURE_KINDS)
def test_long_names_are_shown_whole(crowd: Drawn, kind: str) -> None:
    figure = crowd.figures[f"{kind}-causal-antisymmetric"]
    shown = [axes.title.get_text().replace("\N{NO-BREAK SPACE}", " ") for axes in figure.axes]
    # beside its ensemble a panel of amplitudes says α
    titles = {title.replace("\n", " ").partition("; $\\alpha$")[0] for title in shown}
    assert "Causal set of an ensemble whose name goes on and on, $d$ = 3" in titles
    assert "\\$b\\$" in titles
    assert not any("…" in title for title in titles)
