"""Words on figures: ensembles, operators and sizes as a physicist writes them."""

import re
from collections.abc import Sequence
from fractions import Fraction
from numbers import Real
from typing import Any

from matplotlib import rcParams
from matplotlib.font_manager import FontProperties
from matplotlib.textpath import text_to_path

from conetone.figure.closing import Operator, Row

# Proper names; any other ensemble is shown by its own name.
_ENSEMBLES = {
    "minkowski-diamond": "Minkowski diamond",
    "minkowski-box": "Minkowski box",
    "kleitman-rothschild": "Kleitman–Rothschild",
}
_MATRICES = {"causal": "C", "link": "L"}
# A self-adjoint A is A₊ − A₋, its parts of either sign; |M| = (MᵀM)^½ has the singular values of M.
_PARTS = {
    "symmetric": r"{0}+{0}^{{\mathrm{{T}}}}",
    "symmetric-positive": r"({0}+{0}^{{\mathrm{{T}}}})_{{+}}",
    "symmetric-negative": r"({0}+{0}^{{\mathrm{{T}}}})_{{-}}",
    "antisymmetric": r"i({0}-{0}^{{\mathrm{{T}}}})",
    "singular": r"|{0}|",
}
# A piece of text that a line break must not part: mathematics, or a word.
_PIECES = re.compile(r"(?:[^ $\\]|\\.|\$[^$]*\$)+")
_ELLIPSIS = "…"
# Letters on a raster are up to this much wider than their outlines.
_HINTING = 1.06


def ensemble_name(name: str) -> str:
    """An ensemble's name in words."""
    words = name.replace("-", " ").replace("_", " ")
    return plain(_ENSEMBLES.get(name, words[:1].upper() + words[1:]))


def ensemble_label(keys: Row, parameters: Sequence[str]) -> str:
    """An ensemble with those of these parameters that it has: `Minkowski diamond, d = 3`."""
    words = [ensemble_name(keys["ensemble"])]
    for name in parameters:
        value = keys[name]
        if is_number(value):
            symbol = "$d$" if name == "dimension" else plain(name.replace("_", " "))
            words.append(f"{symbol} = {value:g}".replace(" ", "\N{NO-BREAK SPACE}"))
    return ", ".join(words)


def is_number(value: Any) -> bool:
    """Whether a cell holds a number; nulls read as None, NaN or NA."""
    return isinstance(value, Real) and bool(value == value)


def operator_symbol(operator: Operator) -> str:
    """The self-adjoint matrix whose eigenvalues are ranked, as mathematics."""
    return f"${_PARTS[operator.part].format(_matrix(operator))}$"


def operator_label(operator: Operator) -> str:
    """The operator in words, then as mathematics."""
    return f"{plain(operator.matrix)}, {operator.part}: {operator_symbol(operator)}"


def magnitudes_label(operator: Operator) -> str:
    """What is ranked, as the label of an axis."""
    if operator.part == "singular":
        return f"singular values $s_r$ of ${_matrix(operator)}$"
    return f"eigenvalues $|\\lambda_r|$ of {operator_symbol(operator)}"


def _matrix(operator: Operator) -> str:
    return _MATRICES.get(operator.matrix, rf"\mathrm{{{operator.matrix.replace('_', '-')}}}")


def inverse_power(omega: float) -> str:
    """n^−ω with ω as a fraction where it is one."""
    fraction = Fraction(omega).limit_denominator(12)
    text = str(fraction) if abs(fraction - Fraction(omega)) < 1e-9 else f"{omega:.3g}"
    return f"$n^{{-{text}}}$"


def plain(text: str) -> str:
    """Text that no dollar sign turns into mathematics."""
    return text.replace("$", r"\$")


def wrapped(text: str, inches: float, points: float, lines: int = 20) -> str:
    """Text broken into lines no wider than this at this font size; an ellipsis ends what is cut off.

    A word that is too wide for a line is broken inside; mathematics never is.
    """
    made, line = [], ""
    for piece in _PIECES.findall(text):
        longer = f"{line} {piece}"
        if line and text_inches(longer, points) <= inches:
            line = longer
            continue
        made += [line] if line else []
        *full, line = _broken(piece, inches, points)
        made += full
    made.append(line)
    if len(made) > lines:
        made = [*made[: lines - 1], _shortened(made[lines - 1], inches, points)]
    return "\n".join(made)


def _shortened(line: str, inches: float, points: float) -> str:
    while line and (_in_mathematics(line) or text_inches(line + _ELLIPSIS, points) > inches):
        line = line[:-1]
    return line.rstrip() + _ELLIPSIS


def _in_mathematics(text: str) -> bool:
    """Whether the end of a text stands between dollar signs, or just after a backslash."""
    return text.endswith("\\") or len(re.findall(r"(?<!\\)\$", text)) % 2 == 1


def _broken(word: str, inches: float, points: float) -> list[str]:
    if "$" in word or "\\" in word:
        return [word]
    parts = [""]
    for letter in word:
        if parts[-1] and text_inches(parts[-1] + letter, points) > inches:
            parts.append("")
        parts[-1] += letter
    return parts


def text_inches(text: str, points: float) -> float:
    """Width of one line of text in the theme's font."""
    font = FontProperties(family=rcParams["font.family"], size=points)
    width, _, _ = text_to_path.get_text_width_height_descent(text, font, ismath="$" in text)
    return float(width) / 72 * _HINTING
