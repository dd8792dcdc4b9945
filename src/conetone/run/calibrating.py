"""`conetone calibrate`: the same workflow, lock and recovery as `conetone run`, with other targets."""

import sys
import time
from pathlib import Path

from conetone.errors import UsageError
from conetone.run.calibration import CalibrationOutcome, print_calibration, print_calibration_json
from conetone.run.engine import Engine
from conetone.run.growth import follow_the_calibration
from conetone.run.lock import run_lock
from conetone.run.progress import Tally
from conetone.run.recovery import recover
from conetone.run.running import all_cores, work
from conetone.run.workflow import INJECTIONS_KEY, SEED_KEY
from conetone.sweep.calibration import Calibration
from conetone.sweep.definition import load_sweep
from conetone.sweep.plan import Plan

# A rule of workflow/rules/calibrate.smk.
TARGET = "calibrate"


def calibrate_sweep(
    sweep_file: Path,
    results: Path,
    cores: int | None,
    injections: int,
    seed: int | None,
    *,
    quiet: bool = False,
    as_json: bool = False,
) -> int:
    """Inject what is missing and show the coverage; returns 0, or 1 if errors are smaller than promised.

    Raises UsageError for a sweep whose spectra are not all there, else what `run_sweep` raises.
    """
    start = time.monotonic()
    plan = Plan(load_sweep(sweep_file))
    calibration = Calibration(plan, injections, plan.sweep.root_seed if seed is None else seed)
    folder = (results / plan.sweep.name).resolve()
    _require_spectra(sweep_file, results, folder, calibration)
    values = {INJECTIONS_KEY: injections, **({} if seed is None else {SEED_KEY: seed})}
    engine = Engine(sweep_file, folder, cores or all_cores(), targets=(TARGET,), values=values)
    with run_lock(folder):
        notes = recover(folder, engine)
        if not quiet:
            for note in notes:
                print(f"{plan.sweep.name}: {note}", file=sys.stderr, flush=True)
        follow_the_calibration(folder, calibration)
        tally = Tally(calibration, folder, engine.cores)
        work(engine, tally, quiet=quiet)
        seconds = time.monotonic() - start
        outcome = CalibrationOutcome.read(folder, calibration, jobs_run=tally.done, seconds=seconds)
    if as_json:
        print_calibration_json(outcome)
    elif not quiet:
        print_calibration(outcome)
    return 1 if outcome.broken or outcome.empty else 0


def _require_spectra(sweep_file: Path, results: Path, folder: Path, calibration: Calibration) -> None:
    wanted = list(dict.fromkeys(calibration.spectra))
    missing = [path for path in wanted if not (folder / path).is_file()]
    if missing:
        found = f"{len(missing)} of {len(wanted)} tables of spectra missing"
        advice = f"first: conetone run {sweep_file} --results {results}"
        raise UsageError(
            str(folder), found, "a sweep that has been run: its noise is what is injected", advice
        )
