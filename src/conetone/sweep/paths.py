"""Where everything stands inside a sweep's folder; names only, nothing is parsed back from a path."""

from pathlib import Path

from conetone.sweep.blocks import Block
from conetone.sweep.points import OperatorChoice

PIECE_TABLES = ("fits", "bins", "profiles")
CLOSING_TABLES = ("fits", "bins", "profiles", "exponents", "extrapolations")
FIGURE_FOLDER = Path("figures")
FIGURE_SUFFIXES = (".pdf", ".png", ".csv")
# Drawn once for each operator; `exponents` is drawn once for all.
FIGURE_KINDS = ("spectra", "extrapolation", "local-slope")


def orders_path(block: Block) -> Path:
    """The orders of one block."""
    return Path("orders") / f"{block.name}.parquet"


def spectra_path(block: Block, operator: OperatorChoice) -> Path:
    """The spectra of one operator of one block."""
    return Path("spectra") / f"{block.name}.{operator.name}.parquet"


def piece_path(series: str, table: str) -> Path:
    """One of the tables of a single fitted series."""
    return Path("pieces") / f"{series}.{table}.parquet"


def closing_path(table: str) -> Path:
    """One of the tables of the whole sweep."""
    return Path(f"{table}.parquet")


def figure_names(operators: tuple[OperatorChoice, ...]) -> list[str]:
    """Stems of all figures of a sweep."""
    return ["exponents", *(f"{kind}-{operator.name}" for kind in FIGURE_KINDS for operator in operators)]


def figure_paths(operators: tuple[OperatorChoice, ...]) -> list[Path]:
    """Every file that the figure stage writes."""
    return [
        FIGURE_FOLDER / f"{name}{suffix}" for name in figure_names(operators) for suffix in FIGURE_SUFFIXES
    ]
