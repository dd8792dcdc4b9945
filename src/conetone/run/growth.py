"""A sweep that grew or shrank: blocks of another length keep their rows, tables it no longer names hide."""

from collections.abc import Sequence
from pathlib import Path

from conetone.errors import TableError
from conetone.records.files import read_footer, resume_path
from conetone.sweep.calibration import Calibration
from conetone.sweep.paths import CALIBRATION_FOLDER
from conetone.sweep.plan import Job, Plan
from conetone.sweep.requests import without_replicates

# Where tables wait that the sweep does not name at present, under the path they came from.
HIDDEN_FOLDER = "hidden"
DATASETS = ("orders", "spectra")


def follow_the_sweep(folder: Path, plan: Plan) -> None:
    """Make the datasets hold what the sweep names and nothing else, without losing a row.

    Tables of sizes, ensembles or operators that the sweep no longer names are hidden, and come back when it
    names them again. Blocks that it now wants longer or shorter go to the resume folder, from which their
    jobs take over the rows they still need: Snakemake deletes the outputs of a job before it runs again.
    """
    blocks = [job for stage in ("sprinkle", "diagonalise") for job in plan.jobs[stage].values()]
    _follow(folder, blocks, DATASETS)


def follow_the_calibration(folder: Path, calibration: Calibration) -> None:
    """The same for blocks of injections: more of them, or fewer, keep what there is."""
    _follow(folder, list(calibration.jobs["inject"].values()), (CALIBRATION_FOLDER.name,))


def _follow(folder: Path, blocks: Sequence[Job], datasets: Sequence[str]) -> None:
    wanted = {job.outputs[0] for job in blocks}
    for dataset in datasets:
        for path in (folder / dataset).glob("*.parquet"):
            if path.relative_to(folder) not in wanted:
                _move(path, folder / HIDDEN_FOLDER / path.relative_to(folder))
    for path in wanted:
        hidden = folder / HIDDEN_FOLDER / path
        if hidden.is_file() and not (folder / path).exists():
            _move(hidden, folder / path)
    for job in blocks:
        if _differs_in_replicates(folder, job):
            to_resume(folder, job.outputs[0])


def to_resume(folder: Path, output: Path) -> bool:
    """Move a table of this folder to where its job looks for finished rows; False if there is none."""
    if output.is_absolute() or output.suffix != ".parquet" or not (folder / output).is_file():
        return False
    _move(folder / output, folder / resume_path(output))
    return True


def _move(source: Path, target: Path) -> None:
    target.parent.mkdir(parents=True, exist_ok=True)
    source.replace(target)


def _differs_in_replicates(folder: Path, job: Job) -> bool:
    path = folder / job.outputs[0]
    if not path.is_file():
        return False
    try:
        found = str(read_footer(path)["request"])
    except TableError:
        return False
    wanted = job.request.text()
    return found != wanted and without_replicates(found) == without_replicates(wanted)
