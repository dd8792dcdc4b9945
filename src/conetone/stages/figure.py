"""Stage figure: draw the closing tables, the numbers beside each figure, and the table for LaTeX."""

from conetone.figure.amplitudes import amplitudes_numbers, draw_amplitudes
from conetone.figure.closing import ClosingTables
from conetone.figure.diagnostics import diagnostics_numbers, draw_diagnostics
from conetone.figure.dimension import draw_exponents, exponent_numbers
from conetone.figure.extrapolation import draw_extrapolation, extrapolation_numbers
from conetone.figure.files import write_figure, write_text
from conetone.figure.latex import exponents_latex
from conetone.figure.slope import draw_slope, slope_numbers
from conetone.figure.spectra import draw_spectra, spectra_numbers
from conetone.figure.style import theme
from conetone.records.files import read_rows
from conetone.records.tables import COUNT, REAL, SERIES_KEYS, TABLES, TEXT
from conetone.stages.block import log
from conetone.sweep.paths import CLOSING_TABLES, FIGURE_FOLDER, FIGURE_KINDS, LATEX_TABLE, closing_path
from conetone.sweep.requests import FigureRequest

_DRAWING = (
    (spectra_numbers, draw_spectra),
    (extrapolation_numbers, draw_extrapolation),
    (slope_numbers, draw_slope),
    (diagnostics_numbers, draw_diagnostics),
    (amplitudes_numbers, draw_amplitudes),
)
# List columns that are drawn nowhere, but stand in the table for LaTeX.
LISTS = ("sizes", "warnings")
KINDS = dict(zip(FIGURE_KINDS, _DRAWING, strict=True))


def draw_figures(request: FigureRequest) -> None:
    """Write every figure of the operators as PDF, PNG and CSV, and the exponents as a table for LaTeX.

    Raises TableError for a damaged table.
    """
    tables = read_closing_tables()
    with theme():
        numbers = exponent_numbers(tables, request.operators)
        write_figure(FIGURE_FOLDER / "exponents", draw_exponents(numbers, tables, request.operators), numbers)
        for operator in request.operators:
            for kind, (numbers_of, draw) in KINDS.items():
                name = f"{kind}-{operator.name}"
                numbers = numbers_of(tables, operator)
                write_figure(FIGURE_FOLDER / name, draw(numbers, tables, operator), numbers)
                log(f"drew {name}")
    write_text(LATEX_TABLE, exponents_latex(tables, request.operators))


def read_closing_tables() -> ClosingTables:
    """The closing tables, without list columns other than LISTS."""
    rows = {
        name: read_rows(
            closing_path(name),
            [c.name for c in TABLES[name].columns if c.type in (TEXT, COUNT, REAL) or c.name in LISTS],
        )
        for name in CLOSING_TABLES
    }
    return ClosingTables([column.name for column in SERIES_KEYS], **rows)
