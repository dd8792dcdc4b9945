"""Table files: round trips, damage, atomicity, digests, and how others read them."""

import os
import tracemalloc

import numpy as np
import pandas as pd
import pyarrow as pa
import pyarrow.parquet as pq
import pytest

from conetone.diagonalise.full import full_spectrum
from conetone.errors import TableError
from conetone.operators.causal import causal_matrix
from conetone.records.files import (
    ROWS_A_GROUP,
    column_digest,
    content_digest,
    inputs_digest,
    read_footer,
    read_rows,
    write_table,
)
from conetone.records.provenance import blas_threads, software
from conetone.records.tables import ORDERS, SPECTRA, TABLES, VERSIONS
from conetone.sprinkle.catalogue import PARAMETER_NAMES
from conetone.sprinkle.order import Order
from conetone.sprinkle.relation import PackedRelation
from conetone.stages.sprinkle import draw
from conetone.sweep.points import EnsembleChoice, Point

DIAMOND = EnsembleChoice("minkowski-diamond", (("dimension", 3),), "fixed")
LAYERED = EnsembleChoice("kleitman-rothschild", (), "fixed")


def keys(point, replicate):
    columns = point.choice.key_columns(PARAMETER_NAMES)
    return {"point": point.name, **columns, "size": point.size, "replicate": replicate}


def order_rows(choice=DIAMOND, size=40, replicates=4):
    rows = []
    for replicate in range(replicates):
        order = draw(Point(choice, size), 1, replicate)
        rows.append(
            {
                **keys(Point(choice, size), replicate),
                "elements": order.elements,
                "relations": order.relations,
                "links": order.links.pairs,
                "height": order.height,
                "ordering_fraction": order.ordering_fraction,
                "digest": order.digest,
                "packed_relation": order.relation.to_bytes(),
                "positions": None,
                "seconds": 0.25 * replicate,
                "peak_mib": 100.0,
                "status": "ok",
                "reason": None,
            }
        )
    return rows


def spectrum_rows(choice=DIAMOND, size=40, replicates=4):
    rows = []
    for replicate in range(replicates):
        order = draw(Point(choice, size), 1, replicate)
        rows.append(
            {
                **keys(Point(choice, size), replicate),
                "matrix": "causal",
                "part": "antisymmetric",
                "extent": "full",
                "leading_count": None,
                "tolerance": None,
                "residual_bound": None,
                "eigenvalues": full_spectrum(causal_matrix(order), "antisymmetric").eigenvalues.tolist(),
                "elements": order.elements,
                "ordering_fraction": order.ordering_fraction,
                "digest": order.digest,
                "sum_defect": 0.0,
                "square_sum_defect": 1e-17,
                "pairing_defect": None,
                "solver": "lapack-zheevd",
                "threads": 1,
                "seconds": 0.5,
                "peak_mib": 100.0,
                "status": "ok",
                "reason": None,
            }
        )
    return rows


def random_value(kind, generator):
    """A value of an Arrow type, odd ones among them."""
    if pa.types.is_list(kind):
        return [random_value(kind.value_type, generator) for _ in range(generator.integers(0, 5))]
    odd = [0.0, -0.0, np.inf, -np.inf, 5e-324, 1.7976931348623157e308, 0.1, -1 / 3, float(generator.normal())]
    return {
        pa.string(): lambda: str(generator.choice(["", "plain", "Σ λ² − 2 Σ M²", "two\nlines", 'a,b\t"c"'])),
        pa.int64(): lambda: int(generator.choice([0, -1, 2**63 - 1, -(2**63), generator.integers(1000)])),
        pa.float64(): lambda: odd[generator.integers(len(odd))],
        pa.bool_(): lambda: bool(generator.integers(2)),
        pa.binary(): lambda: generator.bytes(int(generator.integers(0, 50))),
    }[kind]()


def random_rows(table, count, seed):
    """Rows that fit a table's schema; nullable columns are null in a third of them."""
    generator = np.random.default_rng(seed)
    return [
        {
            column.name: None
            if column.nullable and generator.random() < 1 / 3
            else random_value(column.type, generator)
            for column in table.columns
        }
        for _ in range(count)
    ]


# --- round trips -----------------------------------------------------------------------------------------


@pytest.mark.parametrize("count", [0, 1, 7, ROWS_A_GROUP, ROWS_A_GROUP + 1, 130])
@pytest.mark.parametrize("table", TABLES.values(), ids=list(TABLES))
def test_rows_come_back_as_they_were(table, count, tmp_path):
    rows = random_rows(table, count, seed=count)
    path = tmp_path / "folder" / "deep" / "table.parquet"  # folders are made
    write_table(path, table, rows, request="r")
    found = read_rows(path)
    assert found == rows
    assert repr(found) == repr(rows)  # == takes −0.0 for 0.0


def test_arrays_are_lists_when_they_come_back(tmp_path):
    rows = spectrum_rows()
    arrays = [{**row, "eigenvalues": np.array(row["eigenvalues"])} for row in rows]
    write_table(tmp_path / "s.parquet", SPECTRA, arrays, request="r")
    assert read_rows(tmp_path / "s.parquet") == rows


def test_an_order_comes_back_as_it_was(tmp_path):
    write_table(tmp_path / "o.parquet", ORDERS, order_rows(), request="r")
    for row in read_rows(tmp_path / "o.parquet"):
        order = Order(PackedRelation.from_bytes(row["elements"], row["packed_relation"]))
        assert order.digest == row["digest"]
        assert order.links.pairs == row["links"]


def test_some_of_the_columns(tmp_path):
    write_table(tmp_path / "o.parquet", ORDERS, order_rows(), request="r")
    found = read_rows(tmp_path / "o.parquet", ["replicate", "digest"])
    assert found == [{"replicate": row["replicate"], "digest": row["digest"]} for row in order_rows()]


def test_names_in_the_path_do_not_become_columns(tmp_path):
    path = tmp_path / "size=7" / "o.parquet"
    write_table(path, ORDERS, order_rows(), request="r")
    assert read_rows(path) == order_rows()


def test_a_large_relation_takes_little_more_than_its_size_to_hash_and_nothing_to_compare(tmp_path):
    """A column of bytes is hashed as it lies: its text would take four times the room."""
    content = np.random.default_rng(1).bytes(20_000_000)
    rows = [{**order_rows(replicates=1)[0], "packed_relation": content}]
    write_table(tmp_path / "o.parquet", ORDERS, rows, request="r")
    column = pq.read_table(tmp_path / "o.parquet", columns=["packed_relation"]).column(0)
    tracemalloc.start()
    digest = column_digest(column)
    _, peak = tracemalloc.get_traced_memory()
    tracemalloc.stop()
    assert peak < 100_000
    assert digest == read_footer(tmp_path / "o.parquet")["columns"]["packed_relation"]
    index = pq.read_schema(tmp_path / "o.parquet").names.index("packed_relation")
    assert pq.read_metadata(tmp_path / "o.parquet").row_group(0).column(index).statistics is None
    assert read_rows(tmp_path / "o.parquet") == rows


def test_bytes_are_told_apart():
    def digest(values):
        return column_digest(pa.chunked_array([pa.array(values, type=pa.binary())]))

    different = [
        [],
        [None],
        [b""],
        [b"null"],
        [b"a", b"b"],
        [b"ab"],
        [b"ab", b""],
        [b"", b"ab"],
        [b"ab", None],
    ]
    assert len({digest(values) for values in different}) == len(different)
    chunks = pa.chunked_array([[b"a", None], [b"b"]], type=pa.binary())
    assert column_digest(chunks) == digest([b"a", None, b"b"])


def test_rows_that_do_not_fit_are_refused(tmp_path):
    good = order_rows()
    for wrong in (
        [{**good[0], "colour": "red"}],
        [good[0], {name: value for name, value in good[1].items() if name != "digest"}],
        [{**good[0], "point": None}],
    ):
        with pytest.raises(TableError, match="table orders, row"):
            write_table(tmp_path / "o.parquet", ORDERS, wrong, request="r")
    assert list(tmp_path.iterdir()) == []


def test_storage(tmp_path):
    write_table(tmp_path / "s.parquet", SPECTRA, spectrum_rows(size=8, replicates=120), request="r")
    metadata = pq.read_metadata(tmp_path / "s.parquet")
    assert [metadata.row_group(i).num_rows for i in range(metadata.num_row_groups)] == [50, 50, 20]
    columns = [metadata.row_group(0).column(i) for i in range(metadata.num_columns)]
    assert {column.compression for column in columns} == {"ZSTD"}
    eigenvalues = next(column for column in columns if column.path_in_schema.startswith("eigenvalues"))
    assert "BYTE_STREAM_SPLIT" in eigenvalues.encodings
    for field, column in zip(pq.read_schema(tmp_path / "s.parquet"), SPECTRA.columns, strict=True):
        assert field.metadata[b"unit"] == column.unit.encode()
        assert field.metadata[b"meaning"] == column.meaning.encode()


# --- damage ----------------------------------------------------------------------------------------------


def read_or_refuse(path):
    """Rows, or None where the file is refused with an explanation."""
    try:
        return read_rows(path)
    except TableError:
        return None


@pytest.mark.parametrize(
    ("table", "rows"), [(ORDERS, order_rows()), (SPECTRA, spectrum_rows())], ids=["orders", "spectra"]
)
def test_a_flipped_bit_is_never_believed(table, rows, tmp_path):
    intact, damaged = tmp_path / "intact.parquet", tmp_path / "damaged.parquet"
    write_table(intact, table, rows, request="r")
    data = intact.read_bytes()
    refused = 0
    positions = range(0, len(data), 3)  # pages, page headers, and Parquet's own footer
    for position in positions:
        flipped = bytearray(data)
        flipped[position] ^= 1 << position % 8
        damaged.write_bytes(flipped)
        found = read_or_refuse(damaged)
        assert found is None or found == rows, f"byte {position}"
        refused += found is None
    # the others do not matter to a reader: statistics, hints in headers, the opening magic number
    assert refused > 0.3 * len(positions)


def test_a_flipped_bit_in_an_eigenvalue_is_found_where_only_it_is_read(tmp_path):
    intact, damaged = tmp_path / "intact.parquet", tmp_path / "damaged.parquet"
    write_table(intact, SPECTRA, spectrum_rows(), request="r")
    metadata = pq.read_metadata(intact)
    chunk = next(
        column
        for column in (metadata.row_group(0).column(i) for i in range(metadata.num_columns))
        if column.path_in_schema.startswith("eigenvalues")
    )
    data = intact.read_bytes()
    end = chunk.data_page_offset + chunk.total_compressed_size
    for position in range(end - chunk.total_compressed_size // 2, end, 5):
        flipped = bytearray(data)
        flipped[position] ^= 1
        damaged.write_bytes(flipped)
        with pytest.raises(TableError, match="damaged"):
            read_rows(damaged, ["eigenvalues"])


def test_a_truncated_file_is_refused(tmp_path):
    path = tmp_path / "o.parquet"
    write_table(path, ORDERS, order_rows(), request="r")
    data = path.read_bytes()
    for length in [*range(0, len(data) - 1, 97), len(data) - 8, len(data) - 1]:
        path.write_bytes(data[:length])
        for read in (read_rows, read_footer):
            with pytest.raises(TableError, match="delete it and run the sweep again"):
                read(path)


@pytest.mark.parametrize(
    "content", [b"", b"PAR1", b"PAR1PAR1", b"PAR1" + bytes(100) + b"PAR1", b"text\n" * 50]
)
def test_other_content_is_refused(content, tmp_path):
    path = tmp_path / "o.parquet"
    path.write_bytes(content)
    for read in (read_rows, read_footer):
        with pytest.raises(TableError, match="a damaged or foreign file"):
            read(path)


def test_a_missing_file_is_refused(tmp_path):
    for read in (read_rows, read_footer, lambda path: inputs_digest([path])):
        with pytest.raises(TableError, match="found no file") as caught:
            read(tmp_path / "nowhere.parquet")
        assert caught.value.exit_code == 2


# --- atomicity -------------------------------------------------------------------------------------------


def half_written(data, file, **options):
    file.write(b"PAR1 and a half")
    raise OSError(28, "No space left on device")


def fail(*arguments):
    raise OSError(5, "Input/output error")


def interrupt(*arguments, **options):
    raise KeyboardInterrupt


@pytest.mark.parametrize("before", [True, False], ids=["over an old file", "for the first time"])
@pytest.mark.parametrize(
    ("function", "failure", "error"),
    [
        ("conetone.records.files.pq.write_table", half_written, OSError),
        ("conetone.records.files.pq.write_table", interrupt, KeyboardInterrupt),
        ("conetone.records.files.os.fsync", fail, OSError),
        ("pathlib.Path.replace", fail, OSError),
    ],
)
def test_a_write_that_fails_leaves_no_trace(function, failure, error, before, tmp_path, monkeypatch):
    path = tmp_path / "o.parquet"
    if before:
        write_table(path, ORDERS, order_rows(replicates=2), request="old")
    old = path.read_bytes() if before else None
    with monkeypatch.context() as patched:
        patched.setattr(function, failure)
        with pytest.raises(error):
            write_table(path, ORDERS, order_rows(), request="new")
    assert list(tmp_path.iterdir()) == ([path] if before else [])
    if before:
        assert path.read_bytes() == old
    write_table(path, ORDERS, order_rows(), request="new")
    assert read_footer(path)["request"] == "new"
    assert list(tmp_path.iterdir()) == [path]


def test_the_file_is_on_disk_before_it_gets_its_name(tmp_path, monkeypatch):
    path, synced = tmp_path / "o.parquet", []

    def fsync(descriptor):
        assert not path.exists()
        size = os.fstat(descriptor).st_size
        assert size == next(tmp_path.iterdir()).stat().st_size > 0
        synced.append(size)

    monkeypatch.setattr("conetone.records.files.os.fsync", fsync)
    write_table(path, ORDERS, order_rows(), request="r")
    assert synced == [path.stat().st_size]


def test_temporary_files_are_hidden_from_readers_of_the_folder(tmp_path, monkeypatch):
    seen = []
    monkeypatch.setattr(
        "conetone.records.files.os.fsync", lambda descriptor: seen.extend(p.name for p in tmp_path.iterdir())
    )
    write_table(tmp_path / "o.parquet", ORDERS, order_rows(), request="r")
    # Arrow and pandas pass over names that begin with a dot or an underscore
    assert len(seen) == 1
    assert seen[0].startswith(".")


# --- footers and digests ---------------------------------------------------------------------------------


def test_footer(tmp_path):
    path = tmp_path / "o.parquet"
    write_table(path, ORDERS, order_rows(), request='{"stage":"sprinkle"}', inputs="ab12")
    footer = read_footer(path)
    data = ORDERS.build(order_rows())
    assert footer["table"] == "orders"
    assert footer["version"] == VERSIONS["sprinkle"]
    assert footer["request"] == '{"stage":"sprinkle"}'
    assert footer["inputs"] == "ab12"
    assert footer["content"] == content_digest(data.select(ORDERS.content_columns))
    assert footer["software"] == software()
    assert footer["software"]["numpy"] == np.__version__
    assert footer["software"]["pyarrow"] == pa.__version__
    assert f"{blas_threads()} threads" in footer["software"]["blas"]


def test_a_parquet_file_of_somebody_else_is_refused(tmp_path):
    for table in (pa.table({"a": [1]}), pa.table({"a": [1]}).replace_schema_metadata({"b": "c"})):
        pq.write_table(table, tmp_path / "other.parquet")
        with pytest.raises(TableError, match="conetone did not write it"):
            read_footer(tmp_path / "other.parquet")


@pytest.mark.parametrize("table", TABLES.values(), ids=list(TABLES))
def test_the_content_digest_does_not_depend_on_the_layout(table, tmp_path):
    data = table.build(random_rows(table, 60, seed=1))
    digest = content_digest(data)
    for number, options in enumerate(
        [{"row_group_size": 1}, {"row_group_size": 7, "compression": "none"}, {"use_dictionary": False}]
    ):
        path = tmp_path / f"{number}.parquet"
        pq.write_table(data, path, **options)
        assert content_digest(pq.read_table(path)) == digest
    assert content_digest(pa.concat_tables([data.slice(0, 1), data.slice(1, 33), data.slice(34)])) == digest
    padded = pa.concat_tables([data.slice(5, 3), data, data.slice(0, 2)]).combine_chunks()
    assert content_digest(padded.slice(3, 60)) == digest


@pytest.mark.parametrize("table", TABLES.values(), ids=list(TABLES))
def test_the_content_digest_changes_with_any_value(table):
    rows = random_rows(table, 6, seed=2)
    digest = content_digest(table.build(rows))
    digests = [digest]
    for column in table.columns:
        generator = np.random.default_rng(3)
        for position in (0, 3, 5):
            value = rows[position][column.name]
            other = value
            while other == value:
                other = random_value(column.type, generator)
            changed = [dict(row) for row in rows]
            changed[position][column.name] = other
            digests.append(content_digest(table.build(changed)))
    assert len(set(digests)) == len(digests)
    assert content_digest(table.build(rows[::-1])) not in digests
    assert content_digest(table.build(rows[:-1])) not in digests


def test_the_content_digest_sees_the_bounds_of_lists_nulls_and_the_last_bit():
    kind = pa.list_(pa.float64())
    different = [
        [[1.0, 2.0], [3.0]],
        [[1.0], [2.0, 3.0]],
        [[1.0, 2.0, 3.0], []],
        [[1.0, 2.0, 3.0], None],
        [[], [1.0, 2.0, 3.0]],
        [None, [1.0, 2.0, 3.0]],
        [[1.0, 2.0], [np.nextafter(3.0, 4)]],
        [[1.0, 2.0], [3.0], []],
        [[0.0], []],
        [[-0.0], []],
    ]
    tables = [pa.table({"x": pa.array(values, kind)}) for values in different]
    tables += [pa.table({"y": pa.array(different[0], kind)}), pa.table({"x": pa.array([0.0, None])})]
    tables += [pa.table({"x": pa.array([0, None])}), pa.table({"x": pa.array([-0.0, None])})]
    assert len({content_digest(table) for table in tables}) == len(tables)


def test_measured_columns_are_no_content(tmp_path):
    slower = [{**row, "seconds": row["seconds"] + 7, "peak_mib": 5000.0} for row in order_rows()]
    for name, rows in (("a", order_rows()), ("b", slower), ("c", order_rows()[:-1])):
        write_table(tmp_path / f"{name}.parquet", ORDERS, rows, request="r")
    contents = {name: read_footer(tmp_path / f"{name}.parquet")["content"] for name in "abc"}
    assert contents["a"] == contents["b"] != contents["c"]


def test_inputs_are_digested_in_order(tmp_path):
    paths = [tmp_path / f"{name}.parquet" for name in "abc"]
    for path, replicates in zip(paths, (1, 2, 1), strict=True):
        write_table(path, ORDERS, order_rows(replicates=replicates), request=path.name)
    a, b, c = paths
    assert inputs_digest([a, b]) == inputs_digest([c, b])  # equal content, whatever was asked
    assert len({inputs_digest(list(p)) for p in ([], [a], [b], [a, b], [b, a], [a, a])}) == 6


# --- as others read them ---------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("table", "rows_of"), [(ORDERS, order_rows), (SPECTRA, spectrum_rows)], ids=["orders", "spectra"]
)
def test_pandas_reads_a_folder_of_blocks_as_one_frame(table, rows_of, tmp_path):
    blocks = {
        "diamond-0": rows_of(DIAMOND, 40, 3),
        "diamond-1": rows_of(DIAMOND, 60, 2),
        "layered-0": rows_of(LAYERED, 40, 3),  # no dimension at all in this file
    }
    for name, rows in blocks.items():
        write_table(tmp_path / f"{name}.parquet", table, rows, request=name)
    frame = pd.read_parquet(tmp_path)
    assert list(frame.columns) == [column.name for column in table.columns]
    assert len(frame) == 8
    layered = frame[frame.ensemble == "kleitman-rothschild"]
    diamond = frame[frame.ensemble == "minkowski-diamond"]
    assert (len(layered), len(diamond)) == (3, 5)
    assert layered.dimension.isna().all()
    assert (diamond.dimension == 3).all()
    expected = {(row["point"], row["replicate"]): row["digest"] for rows in blocks.values() for row in rows}
    found = {(row.point, row.replicate): row.digest for row in frame.itertuples()}
    assert found == expected
    if table is SPECTRA:
        for row in frame.itertuples():
            assert len(row.eigenvalues) == row.elements


def test_pandas_reads_a_folder_in_which_no_ensemble_has_a_dimension(tmp_path):
    write_table(tmp_path / "a.parquet", ORDERS, order_rows(LAYERED), request="r")
    frame = pd.read_parquet(tmp_path)
    assert frame.dimension.isna().all()
    assert len(frame) == 4
