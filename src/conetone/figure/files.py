"""Writing a figure with its numbers: PDF, PNG and CSV, each whole or not at all, always the same bytes."""

import os
from collections.abc import Callable
from pathlib import Path

import pandas as pd
from matplotlib.figure import Figure

# No dates, and no name of a program that could change without the figure.
_METADATA = {
    ".pdf": {"CreationDate": None, "ModDate": None, "Creator": "conetone", "Producer": None},
    ".png": {"Software": None},
}


def write_figure(stem: Path, figure: Figure, numbers: pd.DataFrame) -> None:
    """Write `stem` with the suffixes .pdf, .png and .csv; the folder is made if it is missing."""
    stem.parent.mkdir(parents=True, exist_ok=True)
    # laid out once: each format would round the sizes of letters differently
    layout = figure.get_layout_engine()
    if layout is not None:
        layout.execute(figure)
    figure.set_layout_engine("none")
    for suffix, metadata in _METADATA.items():
        _write(
            stem,
            suffix,
            lambda path, s=suffix, m=metadata: figure.savefig(path, format=s[1:], metadata=m),  # type: ignore[misc]
        )
    _write(stem, ".csv", lambda path: numbers.to_csv(path, index=False, lineterminator="\n"))


def write_text(path: Path, text: str) -> None:
    """Write a text file, whole or not at all; the folder is made if it is missing."""
    path.parent.mkdir(parents=True, exist_ok=True)
    _write(path.with_suffix(""), path.suffix, lambda part: part.write_text(text, encoding="utf-8"))


def _write(stem: Path, suffix: str, write: Callable[[Path], object]) -> None:
    # names may hold dots, so the suffix is appended, not replaced
    temporary = stem.with_name(f".{stem.name}{suffix}.{os.getpid()}.part")
    try:
        write(temporary)
        temporary.replace(stem.with_name(f"{stem.name}{suffix}"))
    finally:
        temporary.unlink(missing_ok=True)
