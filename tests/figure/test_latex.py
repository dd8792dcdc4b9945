"""The table for LaTeX: it is well-formed, and its numbers and notes are those of the rows."""

import ast
import re
import string
import unicodedata
from pathlib import Path

import numpy as np
import pytest

import conetone
from conetone.figure.cells import format_value
from conetone.figure.closing import ClosingTables
from conetone.figure.files import write_text
from conetone.figure.latex import COLUMNS, escaped, exponents_latex
from conetone.records.tables import EXPONENTS, SERIES_KEYS
from conetone.run import outcome

from .tables import ANTISYMMETRIC, LINK, SYMMETRIC

# What the escaped text of a table may hold, and what it stands for.
READ = {
    r"\textbackslash{}": "\\", r"\textasciicircum{}": "^", r"\textasciitilde{}": "~", r"\textbar{}": "|",
    r"\ldots{}": "…", "$<$": "<", "$>$": ">", r"\{": "{", r"\}": "}", r"\$": "$", r"\&": "&", r"\#": "#",
    r"\%": "%", r"\_": "_", r"$\sigma$": "σ", r"$\chi$": "χ", "$^2$": "²", r"$\nu$": "ν", "$-$": "−",
    r"$\alpha$": "α", r"$\infty$": "∞", r"$\omega$": "ω", "---": "—", "--": "–",
    **{f"{letter}{{}}": letter for letter in "-'`,?!"},
    "~": "\N{NO-BREAK SPACE}",
}  # fmt: skip
_TOKEN = re.compile("|".join(re.escape(token) for token in sorted(READ, key=len, reverse=True)))
WARNINGS = (
    "steps in the spectrum: up to 5% off a power law & more, see α(n) = α∞ + a n^−ω in #1",
    "the sizes follow no single power: χ²/ν = 4.1, {fits_2}, C:\\x ~ <3 σ>",
)


def read(text):
    return _TOKEN.sub(lambda found: READ[found.group()], text)


def row(**changes):
    keys = {column.name: None for column in SERIES_KEYS}
    return {
        **dict.fromkeys(column.name for column in EXPONENTS.columns),
        **keys,
        "series": "s", "ensemble": "minkowski-diamond", "dimension": 3, "count": "fixed",
        "matrix": "causal", "part": "antisymmetric",
        "exponent": 0.6912, "statistical": 0.0031, "systematic": 0.0574,
        "expected": 0.75, "expected_standing": "heuristic", "deviation": -1.02,
        "sizes": [256, 512, 1024], "replicates_used": 120, "replicates_attempted": 121,
        "replicates_failed": 1, "warnings": [], "status": "ok",
        **changes,
    }  # fmt: skip


ROWS = [
    row(warnings=[WARNINGS[0]]),
    row(dimension=2, exponent=0.9987, statistical=0.0042, systematic=0.0081, deviation=1.7,
        expected=1.0, expected_standing="exact", warnings=list(WARNINGS)),
    row(ensemble="a_b$c%d&e#f{g}h^i~j\\k", dimension=None, expected=None, deviation=None, sizes=[64]),
    row(exponent=None, statistical=None, systematic=None, deviation=None, sizes=[],
        status="failed", reason="2 usable sizes; 50% & less_than 3"),
    row(part="symmetric", exponent=-0.0241, statistical=0.0308, systematic=0.0876),
    row(part="symmetric", exponent=12.3, statistical=1.2, systematic=34.0),
]  # fmt: skip


def latex(rows, operators=(ANTISYMMETRIC, SYMMETRIC)):
    keys = [column.name for column in SERIES_KEYS]
    return exponents_latex(ClosingTables(keys, (), (), (), rows, ()), operators)


def check(text):
    """Balanced braces and mathematics, environments closed in order, no special that is not a command's."""
    stack, depth, mathematics, at = [], 0, False, 0
    while at < len(text):
        if text[at] == "\\":
            command = re.compile(r"\\([a-zA-Z]+|.)", re.DOTALL).match(text, at).group()
            at += len(command)
            if command in (r"\begin", r"\end"):
                name = re.compile(r"\{([a-z]+)\}").match(text, at).group(1)
                assert command == r"\begin" or stack.pop() == name
                stack += [name] if command == r"\begin" else []
            continue
        letter = text[at]
        assert letter not in "#%", text[at - 30 : at + 30]
        assert letter not in "^_" or mathematics, text[at - 30 : at + 30]
        assert letter != "&" or (stack[-1] == "tabular" and depth == 0 and not mathematics)
        mathematics ^= letter == "$"
        depth += {"{": 1, "}": -1}.get(letter, 0)
        assert depth >= 0
        at += 1
    assert not stack
    assert depth == 0
    assert not mathematics


def without_comments(text):
    return "\n".join(line for line in text.splitlines() if not line.startswith("%"))


def table_rows(text):
    body = text.split(r"\toprule")[1].split(r"\bottomrule")[0].replace(r"\midrule", "")
    return [[cell.strip() for cell in re.split(r"(?<!\\)&", line)] for line in body.split(r"\\")[:-1]]


def number_of_columns(cells):
    return sum(int(found[1]) if (found := re.match(r"\\multicolumn\{(\d+)\}", c)) else 1 for c in cells)


@pytest.mark.parametrize("rows", [ROWS, ROWS[:1], ROWS[3:4], []], ids=["many", "one", "failed", "none"])
def test_the_table_is_well_formed(rows):
    text = without_comments(latex(rows))
    check(text)
    preamble = re.search(r"\\begin\{tabular\}\{([lrc]+)\}", text)[1]
    found = table_rows(text)
    assert {number_of_columns(cells) for cells in found} == {len(COLUMNS)} == {len(preamble)}
    operators = {(each["matrix"], each["part"]) for each in rows}
    assert len(found) == 1 + len(operators) + len(rows)


def test_the_preamble_names_every_package_that_is_used():
    text = latex(ROWS)
    comments = [line for line in text.splitlines() if line.startswith("%")]
    assert text.startswith("%")
    for package, command in (
        ("booktabs", "\\toprule"),
        ("threeparttable", "\\tnote{"),
        ("siunitx", "\\num{"),
    ):
        assert command in text
        assert any(f"\\usepackage{{{package}}}" in line for line in comments)


def test_the_numbers_are_those_of_the_rows():
    found = [cells for cells in table_rows(latex(ROWS)) if cells[0].startswith(r"\quad")]
    assert len(found) == len(ROWS)
    for cells, expected in zip(found, ROWS, strict=True):
        _, value, theory, sizes, replicates = cells
        if expected["exponent"] is None:
            assert value.startswith("---")
        else:
            number = re.match(r"\\num\{(-?\d+)(?:\.(\d+))?\((\d+)\)\((\d+)\)\}", value)
            decimals = len(number[2] or "")
            unit = 10.0**-decimals
            assert abs(float(f"{number[1]}.{number[2] or 0}") - expected["exponent"]) <= 0.501 * unit
            assert abs(int(number[3]) * unit - expected["statistical"]) <= 0.501 * unit
            assert abs(int(number[4]) * unit - expected["systematic"]) <= 0.501 * unit
            assert 10 <= max(int(number[3]), int(number[4])) <= 100
            assert (
                number.group()
                == "\\num{"
                + format_value(*(expected[name] for name in ("exponent", "statistical", "systematic")))
                + "}"
            )
        if expected["expected"] is None:
            assert theory == ""
        else:
            numbers = [float(text) for text in re.findall(r"\$([+-]?[\d.]+)\$", theory)]
            known = [expected["expected"], *([expected["deviation"]] if expected["deviation"] else [])]
            assert numbers == pytest.approx(known, abs=0.05)
            assert expected["expected_standing"] in theory
        assert [int(text) for text in re.findall(r"\d+", sizes.partition("(")[0])] == (
            [expected["sizes"][0], expected["sizes"][-1]] if len(expected["sizes"]) > 1 else expected["sizes"]
        )
        assert replicates == f"{expected['replicates_used']}/{expected['replicates_attempted']}"


def test_notes_and_reasons_stand_below_once_each():
    text = latex(ROWS)
    items = {int(number): read(note) for number, note in re.findall(r"\\item\[(\d+)\] (.*)", text)}
    assert list(items) == [1, 2, 3]
    assert list(items.values()) == [*WARNINGS, ROWS[3]["reason"]]
    for cells, expected in zip(
        [cells for cells in table_rows(text) if cells[0].startswith(r"\quad")], ROWS, strict=True
    ):
        marks = re.search(r"\\tnote\{([\d,]+)\}$", cells[1])
        noted = [items[int(mark)] for mark in marks[1].split(",")] if marks else []
        assert noted == [*([expected["reason"]] if expected["reason"] else []), *expected["warnings"]]


def test_series_are_named_as_on_figures():
    names = [cells[0] for cells in table_rows(latex(ROWS))]
    assert r"\quad Minkowski diamond, $d$~=~3" in names
    assert r"\quad A b\$c\%d\&e\#f\{g\}h\textasciicircum{}i\textasciitilde{}j\textbackslash{}k" in names
    assert r"\multicolumn{5}{l}{causal, antisymmetric: $i(C-C^{\mathrm{T}})$}" in names


def test_only_the_operators_asked_for():
    assert "symmetric: $C+C" not in latex(ROWS, (ANTISYMMETRIC,))
    assert "link" not in latex(ROWS, (ANTISYMMETRIC, LINK))


def test_escaped_text_is_plain_text_again():
    generator = np.random.default_rng(1)
    letters = string.ascii_letters + string.digits + string.punctuation + " σχ²ν−α∞ω…"
    for _ in range(300):
        text = "".join(generator.choice(list(letters), size=generator.integers(0, 30)))
        check(escaped(text))
        assert read(escaped(text)) == text


def test_the_terminal_shows_the_same_numbers(capsys, tmp_path):
    outcome.print_table(outcome.Outcome("s", tmp_path, ROWS, [], 9, 9, 0, 1, 3.0))
    said = capsys.readouterr().out
    values = re.findall(r"\\num\{([^}]*)\}", latex(ROWS))
    assert len(values) == len(ROWS) - 1
    assert all(value in said for value in values)


def texts_of(path):
    """String constants of a module that are no docstrings, f-strings included."""
    tree = ast.parse(path.read_text())
    lone = {id(node.value) for node in ast.walk(tree) if isinstance(node, ast.Expr)}
    for node in ast.walk(tree):
        if isinstance(node, ast.Constant) and isinstance(node.value, str) and id(node) not in lone:
            yield node.value


def test_every_symbol_of_a_note_is_known_to_latex():
    """Notes are written in these packages; LaTeX has their Latin letters, and stops at any other symbol."""
    package = Path(conetone.__file__).parent
    symbols = {
        letter
        for folder in ("stages", "reference", "aggregate", "figure")
        for path in (package / folder).glob("*.py")
        for text in texts_of(path)
        for letter in text
        if not letter.isascii() and path.name != "latex.py"
    }
    assert "σ" in symbols
    unknown = {letter for letter in symbols if escaped(letter) == letter}
    assert {u for u in unknown if not unicodedata.name(u).startswith("LATIN")} == set()


def test_the_file_is_whole_or_not_there(tmp_path, monkeypatch):
    path, text = tmp_path / "figures" / "a.b.tex", latex(ROWS)
    write_text(path, text)
    assert path.read_text(encoding="utf-8") == text
    monkeypatch.setattr(Path, "replace", lambda *_: (_ for _ in ()).throw(OSError("no space left")))
    with pytest.raises(OSError, match="no space"):
        write_text(path, "other")
    assert [each.name for each in path.parent.iterdir()] == ["a.b.tex"]
    assert path.read_text(encoding="utf-8") == text
