"""The processes that work for a sweep: found by a mark in their environment, stopped gently, then firmly."""

import os
from collections.abc import Callable
from contextlib import suppress
from pathlib import Path

import psutil

from conetone.run.workflow import FOLDER_MARK, RUN_MARK

# A job saves its finished rows when it is asked to stop; a library call in progress may delay that.
GRACE_SECONDS = 10.0


def processes_of(folder: Path) -> list[psutil.Process]:
    """Jobs and Snakemake processes that work in a sweep's folder, this process aside."""
    found = []
    for process in psutil.process_iter():
        try:
            marked = process.environ().get(FOLDER_MARK) == str(folder)
        except (psutil.Error, OSError):  # another user's, or gone
            continue
        if marked and process.pid != os.getpid():
            found.append(process)
    return found


def snakemake_started_by_hand(folder: Path) -> psutil.Process | None:
    """A live Snakemake in this folder that no `conetone run` started."""
    for process in psutil.process_iter():
        try:
            here = _is_snakemake(process) and process.cwd() == str(folder)
            if here and RUN_MARK not in process.environ() and FOLDER_MARK not in process.environ():
                return process
        except (psutil.Error, OSError):
            continue
    return None


def stop(processes: list[psutil.Process]) -> None:
    """Stop these processes: terminate, wait a little, kill.

    Snakemake hears it first, so that it starts no new job in place of those that end. The shells around
    jobs do not hear it: they end with their job, and with its exit code, or else Snakemake would take a job
    that has just finished for a failed one and delete its output.
    """
    for process in sorted(processes, key=lambda process: not _is_snakemake(process)):
        if not _is_shell(process):
            _quietly(process.terminate)
    _, stubborn = psutil.wait_procs(processes, timeout=GRACE_SECONDS)
    for process in stubborn:
        _quietly(process.kill)
    psutil.wait_procs(stubborn, timeout=GRACE_SECONDS)


def _is_snakemake(process: psutil.Process) -> bool:
    try:
        # `python -m snakemake …`, or `python …/bin/snakemake …`
        return any(Path(part).name == "snakemake" for part in process.cmdline()[:3])
    except psutil.Error:
        return False


def _is_shell(process: psutil.Process) -> bool:
    try:
        return Path(process.cmdline()[0]).name in ("bash", "sh")
    except (psutil.Error, IndexError):
        return False


def _quietly(send: Callable[[], None]) -> None:
    with suppress(psutil.NoSuchProcess):
        send()
