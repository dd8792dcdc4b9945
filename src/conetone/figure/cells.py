"""A row of `exponents` in words: the same in the terminal and in LaTeX. Loads no library of figures."""

import math
from collections.abc import Mapping, Sequence
from typing import Any


def format_value(value: float | None, statistical: float | None, systematic: float | None) -> str:
    """`0.6910(30)(570)`: the larger error to two digits, both in units of the last digit."""
    if value is None or statistical is None or systematic is None:
        return "none"
    larger = max(statistical, systematic)
    if not (larger > 0 and math.isfinite(larger)):
        return f"{value:.6f}"
    decimals = max(0, 1 - int(f"{larger:.1e}".partition("e")[2]))
    unit = 10**decimals
    return f"{value:.{decimals}f}({round(statistical * unit)})({round(systematic * unit)})"


def format_expected(row: Mapping[str, Any]) -> str:
    """`0.75 heuristic, -1.0 σ`: the expected exponent, its standing, the deviation; empty where unknown."""
    if row["expected"] is None:
        return ""
    deviation = f", {row['deviation']:+.1f} σ" if row["deviation"] is not None else ""
    return f"{row['expected']:.4g} {row['expected_standing']}{deviation}"


def format_sizes(sizes: Sequence[int]) -> str:
    """`256…4096 (5)`: smallest, largest and number of sizes."""
    if len(sizes) > 1:
        return f"{sizes[0]}…{sizes[-1]} ({len(sizes)})"
    return ", ".join(map(str, sizes)) or "none"


def format_replicates(row: Mapping[str, Any]) -> str:
    """`120/121`: replicates used and attempted."""
    return f"{row['replicates_used']}/{row['replicates_attempted']}"


def notes_of(row: Mapping[str, Any]) -> list[str]:
    """Why there is no exponent, then the warnings."""
    return ([row["reason"]] if row["reason"] else []) + list(row["warnings"])


def numbered(row: Mapping[str, Any], notes: dict[str, int]) -> list[int]:
    """Numbers of the notes of a row; `notes` collects all of them, each once, from 1."""
    return [notes.setdefault(note, len(notes) + 1) for note in notes_of(row)]
