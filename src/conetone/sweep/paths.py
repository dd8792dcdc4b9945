"""Where everything stands inside a sweep's folder; names only, nothing is parsed back from a path."""

from pathlib import Path

from conetone.sweep.blocks import Block
from conetone.sweep.points import OperatorChoice

PIECE_TABLES = ("fits", "bins", "profiles", "cutoffs")
CLOSING_TABLES = (
    "fits", "bins", "profiles", "exponents", "extrapolations", "amplitudes", "diagnostics", "differences",
)  # fmt: skip
FIGURE_FOLDER = Path("figures")
CALIBRATION_FOLDER = Path("calibration")
# Also the stem of its figure.
CALIBRATION_TABLE = "calibration"
FIGURE_SUFFIXES = (".pdf", ".png", ".csv")
# The closing table for LaTeX, beside the figures.
LATEX_TABLE = FIGURE_FOLDER / "exponents.tex"
# Drawn once for each operator; `exponents` is drawn once for all.
FIGURE_KINDS = ("spectra", "extrapolation", "local-slope", "diagnostics", "amplitudes")


def orders_path(block: Block) -> Path:
    """The orders of one block."""
    return Path("orders") / f"{block.name}.parquet"


def spectra_path(block: Block, operator: OperatorChoice) -> Path:
    """The spectra of one block that an operator is ranked from; operators may share them."""
    return Path("spectra") / f"{block.name}.{operator.spectral.name}.parquet"


def piece_path(series: str, table: str) -> Path:
    """One of the tables of a single fitted series."""
    return Path("pieces") / f"{series}.{table}.parquet"


def injections_path(series: str, truth: str, number: int) -> Path:
    """One block of injections of a truth into a series."""
    return CALIBRATION_FOLDER / f"{series}.{truth}.{number}.parquet"


def closing_path(table: str) -> Path:
    """One of the tables of the whole sweep."""
    return Path(f"{table}.parquet")


def figure_names(operators: tuple[OperatorChoice, ...]) -> list[str]:
    """Stems of all figures of a sweep."""
    return ["exponents", *(f"{kind}-{operator.name}" for kind in FIGURE_KINDS for operator in operators)]


def figure_paths(operators: tuple[OperatorChoice, ...]) -> list[Path]:
    """Every file that the figure stage writes."""
    names = figure_names(operators)
    drawn = [FIGURE_FOLDER / f"{name}{suffix}" for name in names for suffix in FIGURE_SUFFIXES]
    return [*drawn, LATEX_TABLE]
