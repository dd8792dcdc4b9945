"""`conetone run`: lock, recover, let Snakemake work, show progress and the outcome."""

import os
import shutil
import signal
import sys
import time
from collections.abc import Callable, Iterator, Sequence
from contextlib import contextmanager
from pathlib import Path
from types import FrameType

from rich.console import Console

from conetone.errors import InterruptedRunError, RunFailedError
from conetone.records.files import RESUME_FOLDER
from conetone.run.compiling import show_compiling
from conetone.run.engine import Engine, RunningEngine
from conetone.run.growth import follow_the_sweep
from conetone.run.lock import run_lock
from conetone.run.outcome import Outcome, print_json, print_table
from conetone.run.processes import processes_of, stop
from conetone.run.progress import Display, LiveDisplay, NoDisplay, PlainDisplay, Tally
from conetone.run.recovery import recover
from conetone.sweep.definition import load_sweep
from conetone.sweep.paths import CALIBRATION_FOLDER
from conetone.sweep.plan import Plan

# Compiles kernels; yields (name of the next one, its number from 0, number of all) before each.
Compile = Callable[[], Iterator[tuple[str, int, int]]]

POLL_SECONDS = 0.1
# Lines of a failed job's log, or of Snakemake's, that go into the message.
TAIL = 5


def run_sweep(
    sweep_file: Path,
    results: Path,
    cores: int | None,
    compile_kernels: Compile,
    *,
    snakemake_options: Sequence[str] = (),
    quiet: bool = False,
    as_json: bool = False,
) -> int:
    """Compute what is missing of a sweep; returns the exit code: 0 done, 1 some replicates failed.

    Kernels are compiled before jobs that need them start, so that not every one of them does it.
    Raises SweepError for a faulty sweep file and LiveRunError beside a live run (both exit code 2, nothing
    written), RunFailedError if jobs failed, InterruptedRunError after SIGINT, SIGTERM or SIGHUP.
    """
    start = time.monotonic()
    plan = Plan(load_sweep(sweep_file))
    folder = (results / plan.sweep.name).resolve()
    engine = Engine(sweep_file, folder, cores or all_cores(), tuple(snakemake_options))
    with run_lock(folder):
        notes = recover(folder, engine)
        follow_the_sweep(folder, plan)
        if engine.passes_through:
            return engine.attached()
        if not quiet:
            for note in notes:
                print(f"{plan.sweep.name}: {note}", file=sys.stderr, flush=True)
        tally = Tally(plan, folder, engine.cores)
        if plan.missing(folder, "sprinkle") or plan.missing(folder, "diagonalise"):
            with _interruptions_explained():
                show_compiling(compile_kernels(), quiet=quiet)
        work(engine, tally, quiet=quiet)
        if not plan.missing(folder):
            # rows that no job asked for: with options that stop early, jobs may still come for theirs
            clear_resume_folder(folder, kept=CALIBRATION_FOLDER.name)
        outcome = Outcome.read(folder, plan, jobs_run=tally.done, seconds=time.monotonic() - start)
    if as_json:
        print_json(outcome)
    elif not quiet:
        print_table(outcome)
    return 1 if outcome.replicates_lost else 0


def all_cores() -> int:
    """Cores that this process may use."""
    return len(os.sched_getaffinity(0)) if hasattr(os, "sched_getaffinity") else os.cpu_count() or 1


def clear_resume_folder(folder: Path, *, kept: str) -> None:
    """Drop waiting rows that no job asks for any more; those of one dataset stay."""
    for waiting in (folder / RESUME_FOLDER).glob("*"):
        if waiting.is_dir() and waiting.name != kept:
            shutil.rmtree(waiting, ignore_errors=True)
        elif waiting.is_file():
            waiting.unlink(missing_ok=True)


def _display(quiet: bool) -> Display:
    if quiet:
        return NoDisplay()
    console = Console(stderr=True)
    return LiveDisplay(console) if console.is_terminal else PlainDisplay()


def work(engine: Engine, tally: Tally, *, quiet: bool) -> None:
    """Let Snakemake work to the end, showing progress; raises as `run_sweep` does."""
    display = _display(quiet)
    running: RunningEngine | None = None
    try:
        with _signals_as_interrupts():
            running = engine.start()
            while running.process.poll() is None:
                _follow(running, tally)
                display.show(tally)
                time.sleep(POLL_SECONDS)
            _follow(running, tally)
    except KeyboardInterrupt:
        display.close()
        stop(processes_of(engine.folder))
        if running:
            running.process.wait()
        raise _interrupted() from None
    finally:
        display.close()
        if running:
            running.close()
    if running.process.returncode:
        stop(processes_of(engine.folder))  # jobs that outlived a killed Snakemake
        raise _failure(engine, running, tally)


def _interrupted() -> InterruptedRunError:
    return InterruptedRunError("interrupted; everything finished is kept: the same command goes on from here")


@contextmanager
def _interruptions_explained() -> Iterator[None]:
    try:
        with _signals_as_interrupts():
            yield
    except KeyboardInterrupt:
        raise _interrupted() from None


def _follow(running: RunningEngine, tally: Tally) -> None:
    for event in running.new_events():
        tally.take(event)


@contextmanager
def _signals_as_interrupts() -> Iterator[None]:
    """SIGTERM and a closed terminal become KeyboardInterrupt, as SIGINT does.

    A hangup that is ignored already, as under nohup, stays ignored; SIGINT does not, because shells make
    scripts' background jobs ignore it, and a scheduler that sends it means it.
    """

    def interrupt(number: int, frame: FrameType | None) -> None:
        raise KeyboardInterrupt

    heeded = [signal.SIGINT, signal.SIGTERM]
    if signal.getsignal(signal.SIGHUP) is not signal.SIG_IGN:
        heeded.append(signal.SIGHUP)
    previous = {each: signal.signal(each, interrupt) for each in heeded}
    try:
        yield
    finally:
        for each, handler in previous.items():
            signal.signal(each, handler)


def _failure(engine: Engine, running: RunningEngine, tally: Tally) -> RunFailedError:
    code = running.process.returncode
    if tally.failed:
        lines = [f"{len(tally.failed)} of {tally.total} jobs failed; the rest is kept, run again to retry:"]
        for failed in tally.failed[:TAIL]:
            log = next((engine.folder / log for log in failed["logs"]), None)
            lines.append(f"  {failed['stage']} {failed['name']}: {_last_line(log)} (log: {log})")
        return RunFailedError("\n".join(lines))
    how = f"was killed by signal {-code}" if code < 0 else f"ended with exit code {code}"
    error = RunFailedError(
        f"Snakemake {how}; its last words (all of them: {running.log}):\n{_tail(running.log)}"
    )
    error.exit_code = 2 if code == 2 else 1  # 2: options after -- that Snakemake does not know
    return error


def _last_line(log: Path | None) -> str:
    return (_tail(log, 1).strip() if log else "") or "no message"


def _tail(path: Path, lines: int = TAIL) -> str:
    try:
        text = path.read_text(encoding="utf-8", errors="replace").strip().splitlines()
    except OSError:
        return ""
    return "\n".join(f"  {line}" for line in text[-lines:])
