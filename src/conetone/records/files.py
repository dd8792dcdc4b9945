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
from conetone.records.tables import VERSION, Row, Table

FOOTER_KEY = b"conetone"
COMPRESSION_LEVEL = 3
ROWS_A_GROUP = 50
RESUME_FOLDER = "resume"


def write_table(path: Path, table: Table, rows: Sequence[Row], *, request: str, inputs: str = "") -> None:
    """Write rows as Parquet through the table's schema: temporary file, fsync, rename.

    The footer holds the request the rows answer, the digest of the inputs, the digest of the content, and
    the software. Raises TableError for rows that do not fit the schema.
    """
    data = table.build(rows)
    footer = {
        "table": table.name,
        "version": VERSION,
        "request": request,
        "inputs": inputs,
        "content": content_digest(data.select(table.content_columns)),
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
    """Rows of one table file, checksums verified; raises TableError if it is missing or damaged."""
    try:
        data = pq.read_table(path, columns=columns, page_checksum_verification=True, partitioning=None)
    except (OSError, pa.ArrowException) as error:
        raise _damaged(path, error) from None
    return list(data.to_pylist())


def read_footer(path: Path) -> dict[str, Any]:
    """What the footer of a table file says; raises TableError if the file is missing, damaged or foreign."""
    try:
        metadata: Mapping[bytes, bytes] = pq.read_schema(path).metadata or {}
    except (OSError, pa.ArrowException) as error:
        raise _damaged(path, error) from None
    if FOOTER_KEY not in metadata:
        raise TableError(str(path), "a Parquet file that conetone did not write", "one of conetone's tables")
    return dict(json.loads(metadata[FOOTER_KEY]))


def _damaged(path: Path, error: Exception) -> TableError:
    reason = "no file" if isinstance(error, FileNotFoundError) else f"a damaged file ({error})"
    return TableError(str(path), reason, "an intact Parquet table", "delete it and run the sweep again")


def content_digest(data: pa.Table) -> str:
    """SHA-256 of names, types and values; equal for equal values, however the file was written."""
    digest = hashlib.sha256()
    for name in data.column_names:
        column = data.column(name).combine_chunks()
        # Arrow calls the entries of a list `item` in memory and `element` once read from a file
        kind = f"list of {column.type.value_type}" if pa.types.is_list(column.type) else column.type
        digest.update(f"\n{name} {kind} {len(column)}\n".encode())
        if column.type == pa.list_(pa.float64()):
            digest.update(json.dumps([None if v is None else len(v) for v in column.to_pylist()]).encode())
            digest.update(np.asarray(column.flatten().to_numpy(zero_copy_only=False)).tobytes())
        else:
            digest.update(repr(column.to_pylist()).encode())
    return digest.hexdigest()


def inputs_digest(paths: Sequence[Path]) -> str:
    """SHA-256 over the content digests in the footers of these files, in the order given."""
    contents = [read_footer(path)["content"] for path in paths]
    return hashlib.sha256("\n".join(contents).encode()).hexdigest()


def resume_path(path: Path) -> Path:
    """Where the finished part of an interrupted output waits; paths are relative to the sweep's folder."""
    return Path(RESUME_FOLDER) / path
