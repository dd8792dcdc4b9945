"""Schemas: what a row must be, and what every column says of itself."""

import pyarrow as pa
import pytest

from conetone.errors import TableError
from conetone.records.tables import EXPONENTS, FITS, ORDERS, SPECTRA, TABLES, Column, Table
from conetone.sprinkle.catalogue import PARAMETER_NAMES

NUMBERS = Table(
    "numbers",
    (
        Column("name", pa.string(), "a name"),
        Column("value", pa.float64(), "a value", "s", nullable=True),
        Column("seconds", pa.float64(), "time it took", "s", measured=True),
    ),
)
ROW = {"name": "one", "value": 1.0, "seconds": 0.5}


def test_rows_become_a_table():
    built = NUMBERS.build([ROW, {**ROW, "value": None}])
    assert built.to_pylist() == [ROW, {**ROW, "value": None}]
    assert built.schema.equals(NUMBERS.schema, check_metadata=True)
    assert NUMBERS.build([]).num_rows == 0


def test_an_unknown_column_is_refused():
    with pytest.raises(TableError, match=r"table numbers, row 1: found an unknown column extra"):
        NUMBERS.build([ROW, {**ROW, "extra": 1}])


@pytest.mark.parametrize("name", list(ROW))
def test_a_missing_column_is_refused(name):
    with pytest.raises(
        TableError, match=f"row 0: found no value for column {name}; allowed: exactly name, value"
    ):
        NUMBERS.build([{key: value for key, value in ROW.items() if key != name}])


@pytest.mark.parametrize("name", ["name", "seconds"])
def test_a_null_is_refused_where_there_must_be_a_value(name):
    with pytest.raises(TableError, match=f"row 2, column {name}: found null; .*not nullable"):
        NUMBERS.build([ROW, ROW, {**ROW, name: None}])


@pytest.mark.parametrize("table", TABLES.values(), ids=list(TABLES))
def test_every_column_says_what_it_is(table):
    names = [column.name for column in table.columns]
    assert len(set(names)) == len(names)
    assert TABLES[table.name] is table
    for column, field in zip(table.columns, table.schema, strict=True):
        assert field.name == column.name
        assert field.type == column.type
        assert field.nullable == column.nullable
        assert field.metadata == {b"unit": column.unit.encode(), b"meaning": column.meaning.encode()}
        assert column.meaning
        assert column.unit


@pytest.mark.parametrize("table", TABLES.values(), ids=list(TABLES))
def test_only_time_and_memory_are_measured(table):
    measured = {column.name for column in table.columns if column.measured}
    assert measured == {"seconds", "peak_mib"} & {column.name for column in table.columns}
    assert set(table.content_columns) == {column.name for column in table.columns} - measured


@pytest.mark.parametrize("table", TABLES.values(), ids=list(TABLES))
def test_key_columns(table):
    columns = {column.name: column for column in table.columns}
    assert not columns["ensemble"].nullable
    for name in ("dimension", *PARAMETER_NAMES):
        assert columns[name].nullable  # an ensemble need not have it
    assert ("series" in columns) != ("point" in columns)


def test_failures_have_rows_with_a_reason():
    for table in (ORDERS, SPECTRA, FITS, EXPONENTS):
        columns = {column.name: column for column in table.columns}
        assert not columns["status"].nullable
        assert columns["reason"].nullable
    # every result of a replicate may be missing, no key may
    for table in (ORDERS, SPECTRA):
        for column in table.columns:
            if column.name in ("elements", "relations", "links", "height", "digest", "eigenvalues", "solver"):
                assert column.nullable
            if column.name in ("point", "size", "replicate", "count", "matrix", "part"):
                assert not column.nullable
