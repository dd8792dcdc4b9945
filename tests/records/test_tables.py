"""Schemas: what a row must be, and what every column says of itself."""

import pyarrow as pa
import pytest

from conetone.errors import TableError
from conetone.records.tables import (
    AMPLITUDES,
    BINS,
    CUTOFFS,
    DIAGNOSTICS,
    DIFFERENCES,
    EXPONENTS,
    FITS,
    INJECTIONS,
    ORDERS,
    SERIES_KEYS,
    SPECTRA,
    TABLES,
    VERSIONS,
    Column,
    Table,
)
from conetone.sprinkle.catalogue import PARAMETER_NAMES
from conetone.sweep.paths import CLOSING_TABLES, PIECE_TABLES
from conetone.sweep.requests import Request

NUMBERS = Table(
    "numbers",
    "fit",
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
    if table is DIFFERENCES:
        assert {f"other_{column.name}" for column in SERIES_KEYS} < set(columns)
    assert not columns["ensemble"].nullable
    for name in ("dimension", *PARAMETER_NAMES):
        assert columns[name].nullable  # an ensemble need not have it
    assert ("series" in columns) != ("point" in columns)


def test_failures_have_rows_with_a_reason():
    for table in (ORDERS, SPECTRA, FITS, EXPONENTS, INJECTIONS):
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


def test_a_version_belongs_to_a_stage(monkeypatch):
    """Every stage that has requests has a version; a new one makes the tables of that stage stale alone."""
    stages = {request.stage() for request in Request.__subclasses__()}
    assert set(VERSIONS) == stages
    assert {table.stage for table in TABLES.values()} == stages - {"figure"}
    before = {name: table.version for name, table in TABLES.items()}
    monkeypatch.setitem(VERSIONS, "fit", 99)
    after = {name: table.version for name, table in TABLES.items()}
    assert {name for name in TABLES if before[name] != after[name]} == {"fits", "bins", "profiles", "cutoffs"}


def test_every_table_of_a_series_begins_with_its_keys():
    keys = [column.name for column in SERIES_KEYS]
    for name in {*PIECE_TABLES, *CLOSING_TABLES}:
        assert [column.name for column in TABLES[name].columns[: len(keys)]] == keys


def test_what_has_an_estimator_says_which():
    for table in (FITS, BINS, EXPONENTS, INJECTIONS):
        (estimator,) = [column for column in table.columns if column.name == "estimator"]
        assert not estimator.nullable
        assert "smooth-count" in estimator.meaning or table is INJECTIONS


def test_what_has_no_value_may_be_null_and_nothing_else():
    """Rows of amplitudes and differences exist only where there is a number."""
    for table, nullable in (
        (CUTOFFS, {"dimension"}),
        (AMPLITUDES, {"dimension", "slope_expected", "law", "law_standing", "law_source", "deviation"}),
        (DIAGNOSTICS, {"dimension", "exponent", "statistical", "systematic", "quality"}),
        (DIFFERENCES, {"dimension", "other_dimension"}),
    ):
        found = {column.name for column in table.columns if column.nullable}
        keys = {*PARAMETER_NAMES, *(f"other_{name}" for name in PARAMETER_NAMES)}
        assert found - keys == nullable - keys, table.name
