"""Tables on disk: written whole or not at all, checksummed, and self-describing in their footers."""

import hashlib
import json
import os
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

import numpy as np
import pyarrow as pa
import pyarrow.parquet as pq

from conetone.errors import TableError
from conetone.records.provenance import software
from conetone.records.tables import Row, Table

FOOTER_KEY = b"conetone"
COMPRESSION_LEVEL = 3
ROWS_A_GROUP = 50
RESUME_FOLDER = "resume"


def write_table(path: Path, table: Table, rows: Sequence[Row], *, request: str, inputs: str = "") -> None:
    """Write rows as Parquet through the table's schema: temporary file, fsync, rename.

    The footer holds the request the rows answer, the digest of the inputs, the digest of the content and of
    every column, and the software. Raises TableError for rows that do not fit the schema.
    """
    data = table.build(rows)
    footer = {
        "table": table.name,
        "version": table.version,
        "request": request,
        "inputs": inputs,
        "content": content_digest(data.select(table.content_columns)),
        "columns": {name: column_digest(data.column(name)) for name in data.column_names},
        "software": software(),
    }
    metadata = {FOOTER_KEY: json.dumps(footer, sort_keys=True).encode()}
    path.parent.mkdir(parents=True, exist_ok=True)
    temporary = path.with_name(f".{path.name}.{os.getpid()}.part")
    real_lists = [f.name for f in data.schema if f.type == pa.list_(pa.float64())]
    plain = [f.name for f in data.schema if f.name not in real_lists and not pa.types.is_nested(f.type)]
    try:
        with temporary.open("wb") as file:
            pq.write_table(
                data.replace_schema_metadata(metadata),
                file,
                compression="zstd",
                compression_level=COMPRESSION_LEVEL,
                use_dictionary=[name for name in plain if name != "packed_relation"],
                # the smallest and the largest of large cells would double the memory of writing
                write_statistics=[name for name in plain if name != "packed_relation"],
                use_byte_stream_split=[f"{name}.list.element" for name in real_lists],
                row_group_size=ROWS_A_GROUP,
                write_page_checksum=True,
            )
            file.flush()
            os.fsync(file.fileno())
        temporary.replace(path)
    finally:
        temporary.unlink(missing_ok=True)


def read_rows(path: Path, columns: Sequence[str] | None = None) -> list[dict[str, Any]]:
    """Rows of one table file, every value verified; raises TableError if it is missing or damaged.

    Page checksums cover pages only: a bit flipped in Parquet's own footer can rename a column or drop rows
    silently. So every column read is held against its digest.
    """
    try:
        data = pq.read_table(path, columns=columns, page_checksum_verification=True, partitioning=None)
        expected = _own_footer(data.schema.metadata)["columns"]
        for name in columns or expected:
            if column_digest(data.column(name)) != expected[name]:
                raise ValueError(f"column {name} does not match its digest")
        return list(data.to_pylist())
    except Exception as error:  # whatever decoding raises, the file is not the one that was written
        raise _unreadable(path, error) from None


def read_footer(path: Path) -> dict[str, Any]:
    """What the footer of a table file says; raises TableError if the file is missing, damaged or foreign."""
    try:
        return _own_footer(pq.read_schema(path).metadata)
    except Exception as error:  # as above
        raise _unreadable(path, error) from None


def _own_footer(metadata: Mapping[bytes, bytes] | None) -> dict[str, Any]:
    if FOOTER_KEY not in (metadata or {}):
        raise LookupError("conetone did not write it")
    footer = json.loads((metadata or {})[FOOTER_KEY])
    missing = {"request", "inputs", "content", "columns"} - set(footer)
    if missing:
        raise ValueError(f"its footer lacks {min(missing)}")
    return dict(footer)


def _unreadable(path: Path, error: Exception) -> TableError:
    why = " ".join(str(error).split())  # on one line
    reason = "no file" if isinstance(error, FileNotFoundError) else f"a damaged or foreign file ({why})"
    advice = "delete it and run the sweep again"
    return TableError(str(path), reason, "an intact table that conetone wrote", advice)


def column_digest(column: pa.ChunkedArray) -> str:
    """SHA-256 of a column's type and values; equal for equal values, however the file was written."""
    if pa.types.is_binary(column.type):
        return _bytes_digest(column)
    array = column.combine_chunks()
    # Arrow calls the entries of a list `item` in memory and `element` once read from a file
    kind = f"list of {array.type.value_type}" if pa.types.is_list(array.type) else array.type
    digest = hashlib.sha256(f"{kind} {len(array)}\n".encode())
    if array.type == pa.list_(pa.float64()):
        digest.update(json.dumps(array.value_lengths().to_pylist()).encode())
        digest.update(np.asarray(array.flatten().to_numpy(zero_copy_only=False)).tobytes())
    else:
        digest.update(repr(array.to_pylist()).encode())
    return digest.hexdigest()


def _bytes_digest(column: pa.ChunkedArray) -> str:
    """The same for bytes, without a copy: a packed relation may take hundreds of megabytes."""
    digest = hashlib.sha256(f"{column.type} {len(column)}\n".encode())
    for value in column:
        content = value.as_buffer()
        digest.update(b"null\n" if content is None else f"{content.size}\n".encode())
        if content is not None:
            digest.update(content)
    return digest.hexdigest()


def content_digest(data: pa.Table) -> str:
    """SHA-256 of the names and digests of a table's columns."""
    columns = [f"{name} {column_digest(data.column(name))}" for name in data.column_names]
    return hashlib.sha256("\n".join(columns).encode()).hexdigest()


def inputs_digest(paths: Sequence[Path]) -> str:
    """SHA-256 over the content digests in the footers of these files, in the order given."""
    contents = [read_footer(path)["content"] for path in paths]
    return hashlib.sha256("\n".join(contents).encode()).hexdigest()


def resume_path(path: Path) -> Path:
    """Where the finished part of an interrupted output waits: in the sweep's folder, its path's origin.

    An absolute path's waits beside it.
    """
    return path.parent / RESUME_FOLDER / path.name if path.is_absolute() else Path(RESUME_FOLDER) / path
