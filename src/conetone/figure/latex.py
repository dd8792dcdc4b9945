"""The closing table of exponents for LaTeX, with the same cells as in the terminal."""

import re
import unicodedata
from collections.abc import Mapping, Sequence
from typing import Any

from conetone.figure.cells import (
    format_expected,
    format_replicates,
    format_sizes,
    format_value,
    numbered,
)
from conetone.figure.closing import ClosingTables, Operator
from conetone.figure.labels import ensemble_label, operator_label

COLUMNS = ("series", "exponent", "expected", "sizes", "used/attempted")

_PREAMBLE = """\
% Preamble: \\usepackage{booktabs}
%           \\usepackage{threeparttable}
%           \\usepackage{siunitx}  % 3.1 or later, which reads two uncertainties
"""
_HEAD = """\
\\begin{table}
  \\centering
  \\begin{threeparttable}
    \\caption{Exponents at infinite size. In brackets the statistical, then the systematic error, in units of
      the last digits; after an expected exponent its standing and the deviation from it.}
    \\label{tab:exponents}
    \\begin{tabular}{lllll}
      \\toprule
"""
_FOOT = """\
  \\end{threeparttable}
\\end{table}
"""

# What LaTeX reads as a command, or shows as another letter.
_SPECIALS = {
    "\\": r"\textbackslash{}", "{": r"\{", "}": r"\}", "$": r"\$", "&": r"\&", "#": r"\#", "%": r"\%",
    "_": r"\_", "^": r"\textasciicircum{}", "~": r"\textasciitilde{}",
    "<": "$<$", ">": "$>$", "|": r"\textbar{}",
}  # fmt: skip
_GREEK = (
    "ALPHA", "BETA", "GAMMA", "DELTA", "ZETA", "ETA", "THETA", "KAPPA", "MU", "NU", "XI", "PI", "RHO",
    "SIGMA", "TAU", "PHI", "CHI", "PSI", "OMEGA",
)  # fmt: skip
# What stands in notes and is no letter to LaTeX without further packages.
_UNICODE = {
    **{unicodedata.lookup(f"GREEK SMALL LETTER {name}"): f"$\\{name.lower()}$" for name in _GREEK},
    "ε": r"$\varepsilon$", "Δ": r"$\Delta$",
    "Λ": r"$\Lambda$", "Σ": r"$\Sigma$", "∞": r"$\infty$", "−": "$-$", "±": r"$\pm$", "×": r"$\times$",
    "·": r"$\cdot$", "≤": r"$\leq$", "≥": r"$\geq$", "≠": r"$\neq$", "≈": r"$\approx$", "∝": r"$\propto$",
    "→": r"$\to$", "√": r"$\surd$", "‖": r"$\|$", "∈": r"$\in$", "′": "$'$", "ᵀ": r"$^{\mathrm{T}}$",
    "²": "$^2$", "³": "$^3$", "½": r"$\frac12$", "…": r"\ldots{}", "–": "--", "—": "---",
    "\N{NO-BREAK SPACE}": "~",
}  # fmt: skip
# Letters that LaTeX joins into another one: -- is a dash, '' a quotation mark.
_JOINED = re.compile(r"([-'`,])(?=\1)|([?!])(?=`)")
# Mathematics and escaped dollar signs of the labels of figures, which LaTeX reads as they are.
_MATHEMATICS = re.compile(r"(\\\$|\$[^$]*\$)")
_NUMBER = re.compile(r"[+-]?\d+(?:\.\d+)?(?:e[+-]?\d+)?")


def exponents_latex(tables: ClosingTables, operators: Sequence[Operator]) -> str:
    """A table environment with one row a series, grouped by operator, and its notes below, numbered.

    Failed series have a dash and their reason as a note. Rows of `exponents` need `sizes` and `warnings`.
    A comment at the top says which packages it needs; values are `\\num{value(stat)(sys)}` of siunitx.
    """
    notes: dict[str, int] = {}
    lines = [_row(COLUMNS)]
    for operator in operators:
        series = tables.series_of(operator)
        if not series:
            continue
        label = f"\\multicolumn{{{len(COLUMNS)}}}{{l}}{{{_escaped_label(operator_label(operator))}}}"
        lines += [r"\midrule", label + r" \\"]
        lines += [_row(_cells(row, tables.parameters, notes)) for row in series]
    body = "".join(f"      {line}\n" for line in [*lines, r"\bottomrule"])
    items = "".join(f"      \\item[{number}] {escaped(note)}\n" for note, number in notes.items())
    listed = f"    \\begin{{tablenotes}}\n{items}    \\end{{tablenotes}}\n" if items else ""
    return _PREAMBLE + _HEAD + body + "    \\end{tabular}\n" + listed + _FOOT


def escaped(text: str) -> str:
    """Text as LaTeX shows it: specials escaped, symbols as mathematics; other letters stay."""
    apart = _JOINED.sub(r"\g<0>{}", _replaced(text, _SPECIALS))
    return _replaced(apart, _UNICODE)


def _replaced(text: str, letters: Mapping[str, str]) -> str:
    return "".join(letters.get(letter, letter) for letter in text)


def _cells(row: Mapping[str, Any], parameters: Sequence[str], notes: dict[str, int]) -> list[str]:
    marks = ",".join(map(str, numbered(row, notes)))
    value = "---"
    if row["exponent"] is not None:
        value = f"\\num{{{format_value(row['exponent'], row['statistical'], row['systematic'])}}}"
    return [
        f"\\quad {_escaped_label(ensemble_label(row, parameters))}",
        value + (f"\\tnote{{{marks}}}" if marks else ""),
        _with_numbers(format_expected(row)),
        escaped(format_sizes(row["sizes"])),
        escaped(format_replicates(row)),
    ]


def _row(cells: Sequence[str]) -> str:
    return " & ".join(cells) + r" \\"


def _escaped_label(label: str) -> str:
    """A label of a figure, whose mathematics is LaTeX already."""
    parts = _MATHEMATICS.split(label)
    return "".join(part if i % 2 else escaped(part) for i, part in enumerate(parts))


def _with_numbers(text: str) -> str:
    """Escaped text with numbers as mathematics, so that a sign is no hyphen."""
    found = re.split(f"({_NUMBER.pattern})", text)
    return "".join(f"${part}$" if i % 2 else escaped(part) for i, part in enumerate(found))
