"""What is drawn is what stands in the table beside it: no artist without its numbers, no number undrawn."""

import numpy as np
import pandas as pd
import pytest
from matplotlib.artist import Artist
from matplotlib.collections import LineCollection, PolyCollection
from matplotlib.lines import Line2D
from matplotlib.patches import Rectangle

from .drawing import Drawn, artists

Points = list[tuple[float, float]]


def points_of(artist: Artist) -> Points:
    """The numbers an artist holds, as sorted points."""
    if isinstance(artist, Line2D):
        found = np.column_stack([artist.get_xdata(), artist.get_ydata()])
    elif isinstance(artist, LineCollection):
        found = np.concatenate(artist.get_segments())
    elif isinstance(artist, PolyCollection):
        found = np.unique(np.concatenate([path.vertices for path in artist.get_paths()]), axis=0)
    else:
        raise AssertionError(f"an artist of a kind that no figure here draws: {artist}")
    return sorted(map(tuple, np.asarray(found, dtype=float).tolist()))


def points(rows: pd.DataFrame, x: str, *columns: str) -> Points:
    return sorted((float(row[x]), float(row[y])) for _, row in rows.iterrows() for y in columns)


def expect(expected: dict[str, Points], name: str, rows: pd.DataFrame, x: str, *columns: str) -> None:
    assert name not in expected
    expected[name] = points(rows, x, *columns)


def compare(figure, expected: dict[str, Points], levels: dict[str, float], windows: dict[str, tuple]) -> None:
    found = artists(figure)
    assert set(found) == {*expected, *levels, *windows}
    for name, wanted in expected.items():
        (artist,) = found[name]
        assert points_of(artist) == wanted, name
    for name, level in levels.items():
        (line,) = found[name]
        assert isinstance(line, Line2D)
        assert list(line.get_ydata()) == [level, level]
    for name, (first, last) in windows.items():
        for patch in found[name]:
            assert isinstance(patch, Rectangle)
            # a rectangle keeps its width, not its far end
            assert (patch.get_x(), patch.get_x() + patch.get_width()) == pytest.approx(
                (first, last), rel=1e-14
            )


def ends(rows: pd.DataFrame) -> dict[str, tuple[float, float]]:
    windows = rows[rows.layer == "window"]
    return {f"window:{row.series}": (row["rank"], row["last_rank"]) for _, row in windows.iterrows()}


def levels(rows: pd.DataFrame, column: str) -> dict[str, float]:
    return {f"expected:{row.series}": row[column] for _, row in rows[rows.layer == "expected"].iterrows()}


def names(drawn: Drawn, kind: str) -> list[str]:
    return [f"{kind}-{operator.name}" for operator in drawn.operators]


def test_spectra(any_drawn: Drawn) -> None:
    for name in names(any_drawn, "spectra"):
        csv = any_drawn.csv(name)
        expected: dict[str, Points] = {}
        for (layer, series, size), rows in csv.groupby(["layer", "series", "size"]):
            gid = f"{series}:{size:.0f}"
            if layer == "spectrum":
                expect(expected, f"spectrum:{gid}", rows, "rank", "magnitude")
                expect(expected, f"error:{gid}", rows, "rank", "magnitude_low", "magnitude_high")
            elif layer == "fit":
                expect(expected, f"fit:{gid}", rows, "rank", "magnitude")
            elif layer == "residual":
                expect(expected, f"residual:{gid}", rows, "rank", "residual")
        compare(any_drawn.figures[name], expected, {}, ends(csv))


def test_local_slope(any_drawn: Drawn) -> None:
    for name in names(any_drawn, "local-slope"):
        csv = any_drawn.csv(name)
        expected: dict[str, Points] = {}
        for (series, size), rows in csv[csv.layer == "slope"].groupby(["series", "size"]):
            expect(expected, f"slope:{series}:{size:.0f}", rows, "rank", "slope")
            expect(expected, f"error:{series}:{size:.0f}", rows, "rank", "slope_low", "slope_high")
        compare(any_drawn.figures[name], expected, levels(csv, "slope"), ends(csv))


def test_extrapolation(any_drawn: Drawn) -> None:
    for name in names(any_drawn, "extrapolation"):
        csv = any_drawn.csv(name)
        expected: dict[str, Points] = {}
        for (layer, series), rows in csv[csv.layer != "expected"].groupby(["layer", "series"]):
            expect(expected, f"{layer}:{series}", rows, "abscissa", "exponent")
            for kind in ("statistical", "total"):
                low, high = f"{kind}_low", f"{kind}_high"
                if layer == "curve":
                    expect(expected, f"{kind}-band:{series}", rows, "abscissa", low, high)
                elif kind == "total":
                    expect(expected, f"{layer}-total:{series}", rows, "abscissa", low, high)
                else:
                    expect(expected, f"{layer}-statistical:{series}:low", rows, "abscissa", low)
                    expect(expected, f"{layer}-statistical:{series}:high", rows, "abscissa", high)
        sized = set(csv.loc[csv.layer == "size", "series"])
        lines = levels(csv[csv.series.isin(sized)], "exponent")
        compare(any_drawn.figures[name], expected, lines, {})


def test_exponents(any_drawn: Drawn) -> None:
    csv = any_drawn.csv("exponents")
    expected: dict[str, Points] = {}
    for series, rows in csv[csv.layer == "exponent"].groupby("series"):
        expect(expected, f"exponent:{series}", rows, "position", "exponent")
        expect(expected, f"total:{series}", rows, "position", "total_low", "total_high")
        expect(expected, f"statistical:{series}:low", rows, "position", "statistical_low")
        expect(expected, f"statistical:{series}:high", rows, "position", "statistical_high")
    for standing, rows in csv[csv.layer == "expected"].groupby("standing"):
        expect(expected, f"expected:{standing}", rows, "position", "exponent")
    if (csv.layer == "curve").any():
        expect(expected, "curve", csv[csv.layer == "curve"], "position", "exponent")
    compare(any_drawn.figures["exponents"], expected, {}, {})


def test_diagnostics(any_drawn: Drawn) -> None:
    """Values quoted and expected stand in two panels: beside the sizes and beside ω."""
    for name in names(any_drawn, "diagnostics"):
        csv = any_drawn.csv(name)
        expected: dict[str, Points] = {}
        twice: dict[str, tuple[float, ...]] = {}
        for (layer, series), rows in csv.groupby(["layer", "series"]):
            if layer == "collapse":
                expect(expected, f"collapse:{series}", rows, "abscissa", "quality")
            elif layer in ("smallest-size", "omega"):
                expect(expected, f"{layer}:{series}", rows, "abscissa", "exponent")
                expect(expected, f"{layer}-quality:{series}", rows, "abscissa", "quality")
                total, ends = f"{layer}-total:{series}", ("total_low", "total_high")
                expect(expected, total, rows, "abscissa", *ends)
                inner, ends = f"{layer}-statistical:{series}", ("statistical_low", "statistical_high")
                if layer == "omega":
                    expect(expected, inner, rows, "abscissa", *ends)
                else:
                    expect(expected, f"{inner}:low", rows, "abscissa", ends[0])
                    expect(expected, f"{inner}:high", rows, "abscissa", ends[1])
            else:
                (row,) = rows.itertuples()
                twice[f"{layer}:{series}"] = (row.exponent, row.exponent)
                if layer == "quoted":
                    twice[f"quoted-total:{series}"] = (row.total_low, row.total_high)
        found = artists(any_drawn.figures[name])
        assert set(found) == {*expected, *twice}
        for gid, wanted in expected.items():
            (artist,) = found[gid]
            assert points_of(artist) == wanted, gid
        for gid, wanted in twice.items():
            assert len(found[gid]) == 2, gid
            for artist in found[gid]:
                if isinstance(artist, Rectangle):
                    ends = (artist.get_y(), artist.get_y() + artist.get_height())
                    assert ends == pytest.approx(wanted, rel=1e-14)
                else:
                    assert isinstance(artist, Line2D)
                    assert tuple(artist.get_ydata()) == wanted


def test_amplitudes(any_drawn: Drawn) -> None:
    for name in names(any_drawn, "amplitudes"):
        csv = any_drawn.csv(name)
        expected: dict[str, Points] = {}
        for (layer, series), rows in csv.groupby(["layer", "series"]):
            expect(expected, f"{layer}:{series}", rows, "smooth_rank", "scaled")
            if layer == "cutoff":
                expect(expected, f"cutoff-total:{series}", rows, "smooth_rank", "total_low", "total_high")
                for end in ("low", "high"):
                    gid = f"cutoff-statistical:{series}:{end}"
                    expect(expected, gid, rows, "smooth_rank", f"statistical_{end}")
        compare(any_drawn.figures[name], expected, {}, {})


def test_what_is_quoted_reads_in_grey(study: Drawn) -> None:
    """Bands of the profile over ω are darker than the band of the quoted value; weights: Rec. 601."""
    found = artists(study.figures["diagnostics-causal-antisymmetric"])
    series = "minkowski-diamond-3-causal-antisymmetric"

    def grey(artist: Artist) -> float:
        red, green, blue, alpha = np.atleast_2d(artist.get_facecolor())[0]
        return 1 - alpha * (1 - float(np.dot((0.299, 0.587, 0.114), (red, green, blue))))

    quoted = grey(found[f"quoted-total:{series}"][0])
    total = grey(found[f"omega-total:{series}"][0])
    statistical = grey(found[f"omega-statistical:{series}"][0])
    assert quoted - total > 0.05
    assert total - statistical > 0.05


@pytest.mark.parametrize("name", ["spectra-causal-antisymmetric", "local-slope-causal-antisymmetric"])
def test_all_sizes_look_different_in_grey(study: Drawn, name: str) -> None:
    """Marker and lightness tell sizes apart without colour; weights of red, green and blue: Rec. 601."""
    found = {
        k: v[0] for k, v in artists(study.figures[name]).items() if k.split(":")[0] in ("spectrum", "slope")
    }
    lines = [line for key, line in found.items() if "box" in key]
    assert len(lines) == 5
    assert len({line.get_marker() for line in lines}) == 5
    grey = [float(np.dot((0.299, 0.587, 0.114), line.get_color())) for line in lines]
    assert min(-np.diff(grey)) > 0.02
