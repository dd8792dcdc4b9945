"""What a dead run left behind: orphaned jobs, Snakemake's lock, outputs finished but not recorded."""

import binascii
import subprocess
from base64 import urlsafe_b64decode
from collections.abc import Iterator
from pathlib import Path

from conetone.errors import LiveRunError
from conetone.records.files import RESUME_FOLDER
from conetone.run.engine import Engine
from conetone.run.growth import to_resume
from conetone.run.processes import processes_of, snakemake_started_by_hand, stop
from conetone.sweep.paths import CALIBRATION_FOLDER

SNAKEMAKE_LOCKS = Path(".snakemake") / "locks"
SNAKEMAKE_INCOMPLETE = Path(".snakemake") / "incomplete"


def recover(folder: Path, engine: Engine) -> list[str]:
    """Clear what a dead run left; returns what was done, as sentences. Call it holding the run lock.

    Orphaned jobs are asked to stop and keep their finished rows. Tables that were finished but not yet
    recorded by Snakemake, which would delete them, wait in the resume folder for the job to take them up.
    Raises LiveRunError beside a live Snakemake that was started by hand.
    """
    by_hand = snakemake_started_by_hand(folder)
    if by_hand is not None:
        raise LiveRunError(
            f"{folder}: another run of this sweep is live, snakemake as process {by_hand.pid};"
            " wait for it, or stop it"
        )
    done = []
    orphans = processes_of(folder)
    if orphans:
        stop(orphans)
        done.append(f"stopped {len(orphans)} processes of a dead run")
    if any((folder / SNAKEMAKE_LOCKS).glob("*")):
        unlocking = subprocess.run(
            engine.unlock_command, cwd=folder, capture_output=True, text=True, check=False
        )
        if unlocking.returncode == 0:
            done.append("removed the lock of a dead run")
    for partial in partial_files(folder):
        partial.unlink(missing_ok=True)
    kept = [output for output in _unrecorded_outputs(folder) if to_resume(folder, output)]
    if kept:
        done.append(f"kept {len(kept)} tables that a dead run had finished")
    return done


def partial_files(folder: Path) -> list[Path]:
    """Files that a killed job was writing: they never had their name, so nothing ever read them."""
    names = ("orders", "spectra", "pieces", "figures", RESUME_FOLDER)
    homes = (Path(), CALIBRATION_FOLDER, *map(Path, names))
    deep = [folder / RESUME_FOLDER / home for home in homes]
    return [path for home in [*(folder / home for home in homes), *deep] for path in home.glob(".*.part")]


def _unrecorded_outputs(folder: Path) -> Iterator[Path]:
    """Outputs that Snakemake has marked as begun and not as ended; its marker's name encodes the path."""
    root = folder / SNAKEMAKE_INCOMPLETE
    for marker in root.rglob("*"):
        if marker.is_file():
            encoded = "".join(part.removeprefix("@") for part in marker.relative_to(root).parts)
            try:
                yield Path(urlsafe_b64decode(encoded).decode())
            except (binascii.Error, ValueError):
                continue
