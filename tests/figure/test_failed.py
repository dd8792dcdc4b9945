"""Series without a result: not drawn, but named, each with its reason; figures exist all the same."""

from pathlib import Path

from conetone.figure.amplitudes import amplitudes_numbers, draw_amplitudes
from conetone.figure.closing import ClosingTables
from conetone.figure.diagnostics import diagnostics_numbers, draw_diagnostics
from conetone.records.tables import SERIES_KEYS
from conetone.sweep.paths import FIGURE_FOLDER, FIGURE_KINDS, figure_paths

from .conftest import LONG
from .drawing import Drawn, artists, draw, texts
from .tables import ANTISYMMETRIC, DIAMONDS, LINK, Rows, failed, make_tables

REASON = "2 usable sizes; extrapolation takes 3"


def written(drawn: Drawn, name: str) -> str:
    """Everything written on a figure, with plain spaces."""
    found = " ".join(text.get_text() for text in texts(drawn.figures[name]))
    return found.replace("\n", " ").replace("\N{NO-BREAK SPACE}", " ")


def test_exponents_without_a_value_are_named(crowd: Drawn) -> None:
    csv = crowd.csv("exponents")
    assert not (csv.loc[csv.layer == "exponent", "dimension"] == 3).any()
    note = written(crowd, "exponents")
    assert "Not drawn, because without a value: Minkowski diamond, $d$ = 3 (causal, antisymmetric);" in note
    assert "Minkowski diamond, $d$ = 2 (" not in note


def test_sizes_are_drawn_without_an_extrapolation(crowd: Drawn) -> None:
    csv = crowd.csv("extrapolation-causal-antisymmetric")
    diamond = csv[(csv.ensemble == "minkowski-diamond") & (csv.dimension == 3)]
    assert set(diamond.layer) == {"size", "expected"}
    assert (diamond.layer == "size").sum() == 5
    note = written(crowd, "extrapolation-causal-antisymmetric")
    assert f"Minkowski diamond, $d$ = 3 is not extrapolated: {REASON}." in note


def test_an_empty_panel_says_why(crowd: Drawn, nothing: Drawn) -> None:
    for kind in FIGURE_KINDS:
        name = f"{kind}-causal-antisymmetric"
        assert written(crowd, name).count(f" {REASON}") >= 1
        assert written(nothing, name).count(REASON) == 2


def test_all_failed_leaves_nothing_but_words(nothing: Drawn) -> None:
    for name, figure in nothing.figures.items():
        assert not [gid for gid in artists(figure) if not gid.startswith("expected:")], name
    assert "no exponent at infinite size" in written(nothing, "exponents")


def test_one_size_has_a_spectrum_and_no_exponent(crowd: Drawn) -> None:
    spectra, exponents = crowd.csv("spectra-causal-antisymmetric"), crowd.csv("exponents")
    assert set(spectra[spectra.ensemble == LONG].layer) == {"spectrum", "fit", "residual", "window"}
    assert set(spectra[spectra.ensemble == LONG]["size"]) == {256}
    assert LONG not in set(exponents.ensemble)


def test_an_operator_without_series(tmp_path: Path) -> None:
    drawn = draw(tmp_path, make_tables([]), (ANTISYMMETRIC, LINK))
    for path in figure_paths(drawn.operators):
        assert (tmp_path / path).stat().st_size > 0
    for path in (tmp_path / FIGURE_FOLDER).glob("*.csv"):
        assert len(path.read_text().splitlines()) == 1
    assert "no series" in written(drawn, "spectra-link-symmetric")


def test_what_nothing_is_expected_of(tmp_path: Path) -> None:
    """A matrix without any expected exponent, an ensemble without dimension: no line, no curve, no strip."""
    drawn = draw(tmp_path, make_tables([("kleitman-rothschild", None)], (LINK,)), (LINK,))
    assert set(drawn.csv("exponents").layer) == {"exponent"}
    assert [axes.get_xlabel() for axes in drawn.figures["exponents"].axes] == ["no dimension"]
    assert "expected" not in set(drawn.csv("extrapolation-link-symmetric").layer)


def test_slopes_collapse_or_not_without_an_exponent(crowd: Drawn) -> None:
    csv = crowd.csv("diagnostics-causal-antisymmetric")
    failed = csv[(csv.ensemble == "minkowski-diamond") & (csv.dimension == 3)]
    assert set(failed.layer) == {"collapse"}
    assert LONG not in set(csv.ensemble)
    assert "slopes of fewer than two sizes" in written(crowd, "diagnostics-causal-antisymmetric")


def said_of_amplitudes(rows: Rows) -> str:
    tables = ClosingTables([column.name for column in SERIES_KEYS], **rows)
    numbers = amplitudes_numbers(tables, ANTISYMMETRIC)
    assert numbers.empty
    return " ".join(text.get_text() for text in texts(draw_amplitudes(numbers, tables, ANTISYMMETRIC)))


def test_without_any_exponent_amplitudes_have_no_power_to_be_scaled_by() -> None:
    rows = make_tables([("kleitman-rothschild", None)])
    rows["exponents"] = failed(rows, lambda row: True)["exponents"]
    assert REASON in said_of_amplitudes(rows).replace("\n", " ")


def test_an_exponent_without_amplitudes_says_why() -> None:
    said = said_of_amplitudes({**make_tables(DIAMONDS[:1]), "amplitudes": []})
    assert "no smooth rank that three sizes reach" in said.replace("\n", " ")


def test_slopes_that_collapse_need_no_legend() -> None:
    """Nothing but a collapse to draw: no exponent of any series."""
    rows = failed(make_tables([("kleitman-rothschild", None)]), lambda row: True)
    tables = ClosingTables([column.name for column in SERIES_KEYS], **rows)
    numbers = diagnostics_numbers(tables, ANTISYMMETRIC)
    assert set(numbers["layer"]) == {"collapse"}
    figure = draw_diagnostics(numbers, tables, ANTISYMMETRIC)
    assert figure.legends == []
    assert list(artists(figure)) == ["collapse:kleitman-rothschild-None-causal-antisymmetric"]
