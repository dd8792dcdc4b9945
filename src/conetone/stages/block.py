"""A block job: one row per replicate, finished rows kept when it is interrupted and taken up again."""

import resource
import sys
import time
from collections.abc import Callable
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

import numpy as np

from conetone.errors import InterruptedRunError, TableError
from conetone.records.files import read_footer, read_rows, resume_path, write_table
from conetone.records.tables import Row, Table
from conetone.stages.interrupt import StopRequested, stop_on_signals
from conetone.sweep.requests import without_replicates

# Finished rows are put aside at least this often, so that a killed process loses no more.
SAVE_SECONDS = 2.0
# What makes a replicate a failed row, not a failed job.
FAILURES = (MemoryError, np.linalg.LinAlgError)

Compute = Callable[[int], dict[str, Any]]


def run_block(
    output: Path,
    table: Table,
    request: str,
    replicates: range,
    compute: Compute,
    empty: Compute,
    still_valid: Callable[[Row], bool],
    inputs: str = "",
    own_process: bool = False,
    number: str = "replicate",
) -> None:
    """Fill a block's table, beginning with the rows that an earlier, interrupted job left.

    `compute(replicate)` gives the result columns; `empty(replicate)` the key columns with all results
    null, for a replicate that fails. Rows are taken over if they answer the same request, the range of
    replicates aside, and `still_valid(row)`. Raises InterruptedRunError after SIGTERM or SIGINT, with every
    finished row in the resume folder. `own_process` says that the process ends with this job. `number` names
    the column that counts rows, where these are no replicates.
    """
    waiting = resume_path(output)
    rows = {
        row[number]: row
        for row in _finished_rows(waiting, request)
        if row[number] in replicates and still_valid(row)
    }
    for replicate in sorted(rows):
        log(f"kept {number} {replicate} of an interrupted job")
    saved = time.monotonic()

    def save(path: Path) -> None:
        write_table(path, table, [rows[r] for r in sorted(rows)], request=request, inputs=inputs)

    with stop_on_signals(
        then_ignore=own_process
    ):  # around the saving, too: a second signal must not cut it short
        try:
            for replicate in replicates:
                if replicate in rows:
                    continue
                rows[replicate] = _one_row(replicate, compute, empty)
                log(f"computed {number} {replicate}")
                if time.monotonic() - saved > SAVE_SECONDS:
                    save(waiting)
                    saved = time.monotonic()
            save(output)
            waiting.unlink(missing_ok=True)
        except StopRequested as stopped:
            save(waiting)
            log(f"stopped by {stopped}; {len(rows)} of {len(replicates)} {number}s are kept")
            raise InterruptedRunError(f"stopped by {stopped}; finished {number}s wait in {waiting}") from None


def _one_row(replicate: int, compute: Compute, empty: Compute) -> dict[str, Any]:
    start = time.perf_counter()
    row = empty(replicate)
    try:
        row.update({"status": "ok", "reason": None, **compute(replicate)})
    except FAILURES as failure:
        row.update(status="failed", reason=f"{type(failure).__name__}: {failure}")
    row.update(seconds=time.perf_counter() - start, peak_mib=peak_mib())
    return row


def _finished_rows(waiting: Path, request: str) -> list[dict[str, Any]]:
    if not waiting.exists():
        return []
    try:
        if without_replicates(read_footer(waiting)["request"]) != without_replicates(request):
            return []
        return read_rows(waiting)
    except TableError as damaged:
        log(f"not resumed: {damaged}")
        return []


def peak_mib() -> float:
    """Largest resident memory of this process so far, MiB."""
    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
    return float(peak) / (2**20 if sys.platform == "darwin" else 2**10)


def log(message: str) -> None:
    """One line in the job's log, which the workflow makes of standard error."""
    print(f"{datetime.now(UTC):%Y-%m-%dT%H:%M:%SZ} {message}", file=sys.stderr, flush=True)
