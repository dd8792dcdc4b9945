"""Where conetone and Snakemake meet: the plan that the Snakefile asks for, and the workflow's files."""

import os
import shlex
import sysconfig
from pathlib import Path
from typing import Any

import conetone
from conetone.errors import ConetoneError
from conetone.sweep.calibration import DEFAULT_INJECTIONS, Calibration
from conetone.sweep.definition import resolve_sweep
from conetone.sweep.plan import Plan

RESULTS_KEY = "results"
# Of a calibration: how many injections, and their seed, else the sweep's.
INJECTIONS_KEY, SEED_KEY = "injections", "injection_seed"
# Environment of every job of a sweep: its folder. Of everything that `conetone run` starts: the run.
FOLDER_MARK, RUN_MARK = "CONETONE_FOLDER", "CONETONE_RUN"
DEFAULT_RESULTS = "results"


def plan_of_config(config: dict[str, Any]) -> tuple[Plan, Calibration, str]:
    """The plan of Snakemake's merged configuration, its calibration, and the folder of the sweep's results.

    Beside the fields of the sweep file `results` is the folder that holds one folder per sweep; `injections`
    and `injection_seed` are of a calibration.
    """
    from snakemake.exceptions import WorkflowError

    values = {key: _plain(value) for key, value in config.items()}
    results = values.pop(RESULTS_KEY, DEFAULT_RESULTS)
    injections, seed = values.pop(INJECTIONS_KEY, DEFAULT_INJECTIONS), values.pop(SEED_KEY, None)
    if not values:
        raise WorkflowError("No sweep: add --configfile SWEEP.yaml, such as config/first-look.yaml.")
    try:
        plan = Plan(resolve_sweep(values))
    except ConetoneError as error:
        raise WorkflowError(str(error)) from None
    folder = Path(str(results)) / plan.sweep.name
    calibration = Calibration(plan, int(injections), plan.sweep.root_seed if seed is None else int(seed))
    return plan, calibration, str(folder.resolve())


def _plain(value: Any) -> Any:
    """Snakemake's ordered mappings as plain ones."""
    if isinstance(value, dict):
        return {key: _plain(inner) for key, inner in value.items()}
    return [_plain(inner) for inner in value] if isinstance(value, list) else value


def shell_prefix(folder: str) -> str:
    """What the shell of every job begins with: this environment's `conetone` first on PATH, and the mark."""
    path = os.pathsep.join([sysconfig.get_path("scripts"), os.environ.get("PATH", os.defpath)])
    assignments = {"PATH": path, FOLDER_MARK: folder}
    text = " ".join(f"{name}={shlex.quote(value)}" for name, value in assignments.items())
    return f"export {text}; ".replace("{", "{{").replace("}", "}}")


def snakefile() -> Path:
    """The Snakefile: of the clone when conetone runs from one, else the copy inside the installed package."""
    package = Path(conetone.__file__).parent
    clone = package.parents[1] / "workflow" / "Snakefile"
    return clone if clone.is_file() else package / "workflow" / "Snakefile"
