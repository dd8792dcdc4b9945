"""The closing tables of a sweep as rows, and the tables of numbers that stand beside the figures."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any, Protocol

import pandas as pd

Row = Mapping[str, Any]

# Key columns of a series that are no parameters of its ensemble.
_NO_PARAMETERS = ("series", "ensemble", "count", "matrix", "part")


class Operator(Protocol):
    """One part of one matrix, by name."""

    @property
    def matrix(self) -> str:
        """Name of the matrix."""

    @property
    def part(self) -> str:
        """Name of the part: symmetric, antisymmetric, …"""


@dataclass(frozen=True)
class ClosingTables:
    """The tables that `aggregate` writes, as rows whose nulls are None; list columns may be absent.

    `keys` names the columns that tell series apart, which all tables have.
    """

    keys: Sequence[str]
    fits: Sequence[Row]
    bins: Sequence[Row]
    profiles: Sequence[Row]
    exponents: Sequence[Row]
    extrapolations: Sequence[Row]
    amplitudes: Sequence[Row] = ()
    diagnostics: Sequence[Row] = ()
    differences: Sequence[Row] = ()

    def series_of(self, operator: Operator) -> list[Row]:
        """Rows of `exponents` of one operator, one a series, failed ones included."""
        return [r for r in self.exponents if (r["matrix"], r["part"]) == (operator.matrix, operator.part)]

    def keys_of(self, series: Row) -> dict[str, Any]:
        """The key columns of a row."""
        return {name: series[name] for name in self.keys}

    @property
    def parameters(self) -> list[str]:
        """Names of all parameters of ensembles, in the order of the columns."""
        return [name for name in self.keys if name not in _NO_PARAMETERS]

    def numbers(self, columns: Sequence[str], rows: Sequence[Row]) -> pd.DataFrame:
        """The numbers of a figure: the keys, then these columns; blank where a layer has no such number."""
        names = [*self.keys, *columns]
        return pd.DataFrame({name: _column([row.get(name) for row in rows]) for name in names})


def of_series(table: Sequence[Row], series: Row) -> list[Row]:
    """A table's rows of the series that a row belongs to."""
    return [row for row in table if row["series"] == series["series"]]


def _column(values: list[Any]) -> Any:
    """Words, whole numbers or real numbers, none of them spoilt by nulls."""
    given = [value for value in values if value is not None]
    if any(isinstance(value, str) for value in given):
        return pd.Series(values, dtype="object")
    whole = bool(given) and all(isinstance(value, int) for value in given)
    return pd.Series(values, dtype="Int64" if whole else "float64")


def layer(
    numbers: pd.DataFrame, name: str, series: str | None = None, size: int | None = None
) -> pd.DataFrame:
    """The rows of one layer of a figure, of one series or of all, of one size or of all."""
    chosen = numbers["layer"] == name
    if series is not None:
        chosen &= numbers["series"] == series
    if size is not None:
        chosen &= numbers["size"] == size
    return numbers[chosen.to_numpy(dtype=bool, na_value=False)]
