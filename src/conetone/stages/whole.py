"""A job with several tables: taken up, all or none, if an earlier run finished them unrecorded."""

from collections.abc import Mapping, Sequence
from pathlib import Path

from conetone.errors import TableError
from conetone.records.files import read_footer, resume_path, write_table
from conetone.records.tables import TABLES, Row
from conetone.stages.block import log


def taken_up(outputs: Mapping[str, Path], request: str, inputs: str) -> bool:
    """Move finished tables of a dead run into place, if they answer this request from these inputs."""
    waiting = {output: resume_path(output) for output in outputs.values()}
    try:
        footers = [read_footer(path) for path in waiting.values()]
    except TableError:
        return False
    if any((footer["request"], footer["inputs"]) != (request, inputs) for footer in footers):
        return False
    for output, path in waiting.items():
        output.parent.mkdir(parents=True, exist_ok=True)
        path.replace(output)
    log("kept the tables of an interrupted run")
    return True


def write_all(
    outputs: Mapping[str, Path], tables: Mapping[str, Sequence[Row]], request: str, inputs: str
) -> None:
    """Write the tables of one job, each to its path."""
    for name, path in outputs.items():
        write_table(path, TABLES[name], tables[name], request=request, inputs=inputs)
