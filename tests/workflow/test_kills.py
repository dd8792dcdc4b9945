"""A run killed at any moment: the same command finishes it, with equal tables and nothing computed twice."""

import random
import signal
import subprocess
import time
from collections import Counter
from pathlib import Path

import psutil
import pytest

from tests.workflow.conftest import Study, assert_equal_contents, kill, wait_until


@pytest.fixture(scope="module")
def fields() -> dict:
    """Blocks of several seconds, so that a kill finds them half done."""
    return {
        "sweep": "killed",
        "root_seed": 11,
        "ensembles": [{"ensemble": "minkowski-diamond", "dimension": 3}],
        "sizes": [256, 362, 1024],
        "replicates": [4, 4, 24],
        "operators": [{"matrix": "causal", "part": "antisymmetric"}],
    }


@pytest.fixture(scope="module")
def undisturbed(tmp_path_factory: pytest.TempPathFactory, fields: dict) -> Study:
    study = Study(tmp_path_factory.mktemp("undisturbed"), fields)
    study.compute()
    assert len(study.history()) == 2 * (4 + 4 + 24), "the history sees every row computed"
    return study


def orders_exist(study: Study) -> bool:
    return any(study.home.glob("orders/*.parquet"))


def block_half_done(study: Study) -> bool:
    return any(study.home.glob("resume/spectra/*.parquet"))


def pieces_exist(study: Study) -> bool:
    return any(study.home.glob("pieces/*.parquet"))


def figures_under_way(study: Study) -> bool:
    return any(study.home.glob("exponents.parquet"))


def processes_left(study: Study) -> list[psutil.Process]:
    found = []
    for process in psutil.process_iter():
        try:
            if process.environ().get("CONETONE_FOLDER") == str(study.home.resolve()):
                found.append(process)
        except psutil.Error:
            continue
    return found


def finish(study: Study, undisturbed: Study, *, all_at_once: bool = False) -> None:
    """Run again after a kill, and hold the result against the undisturbed run.

    With `all_at_once` the jobs themselves were killed: rows of the last SAVE_SECONDS may be lost.
    """
    before = study.rows_computed()
    study.compute()
    after = study.rows_computed()
    recomputed = [row for row, seconds in before.items() if after[row] != seconds]
    assert not recomputed
    if not all_at_once:
        twice = {row: count for row, count in Counter(study.history()).items() if count > 1}
        assert not twice
    assert not list(study.home.rglob(".*.part"))
    assert_equal_contents(study, undisturbed)
    assert not processes_left(study)
    assert not list((study.home / "resume").rglob("*.parquet"))


@pytest.mark.parametrize(
    "moment", [orders_exist, block_half_done, pieces_exist, figures_under_way], ids=lambda m: m.__name__
)
def test_sigkill_of_the_main_process(moment, tmp_path: Path, fields: dict, undisturbed: Study) -> None:
    study = Study(tmp_path, fields)
    run = study.start()
    wait_until(lambda: moment(study), run)
    kill(run, signal.SIGKILL)
    finish(study, undisturbed)
    if moment is figures_under_way:
        assert study.run_well()["jobs_run"] == 1, "only the figures were left"
        assert study.run_well()["jobs_run"] == 0


@pytest.mark.parametrize("number", [signal.SIGINT, signal.SIGTERM])
def test_sigint_and_sigterm_of_the_main_process(
    number: signal.Signals, tmp_path: Path, fields: dict, undisturbed: Study
) -> None:
    study = Study(tmp_path, fields)
    run = study.start()
    wait_until(lambda: block_half_done(study), run)
    said = kill(run, number)
    assert run.returncode == 1
    assert "interrupted" in said
    assert "Traceback" not in said
    assert not processes_left(study), "a stopped run leaves no process behind"
    finish(study, undisturbed)


def test_sigkill_of_snakemake_itself(tmp_path: Path, fields: dict, undisturbed: Study) -> None:
    study = Study(tmp_path, fields)
    run = study.start()
    wait_until(lambda: block_half_done(study), run)
    engine = next(p for p in psutil.Process(run.pid).children() if "snakemake" in p.cmdline())
    engine.kill()
    said = run.communicate(timeout=60)[1]
    assert run.returncode == 1
    assert "killed by signal 9" in said
    finish(study, undisturbed)


def test_sigkill_of_everything(tmp_path: Path, fields: dict, undisturbed: Study) -> None:
    study = Study(tmp_path, fields)
    run = study.start()
    wait_until(lambda: block_half_done(study), run)
    for process in [*psutil.Process(run.pid).children(recursive=True), psutil.Process(run.pid)]:
        process.kill()
    run.communicate(timeout=60)
    (study.home / "orders" / ".half-written.parquet.1.part").write_bytes(b"PAR1")
    finish(study, undisturbed, all_at_once=True)


def test_beside_a_live_run_it_refuses_and_says_which(
    tmp_path: Path, fields: dict, undisturbed: Study
) -> None:
    study = Study(tmp_path, fields)
    run = study.start()
    wait_until(lambda: orders_exist(study), run)
    second = study.run()
    assert second.returncode == 2
    assert f"process {run.pid} on " in second.stderr
    run.communicate(timeout=240)
    assert run.returncode == 0, "the live run was not disturbed"
    assert_equal_contents(study, undisturbed)


def test_beside_a_live_plain_snakemake_it_refuses_too(
    tmp_path: Path, fields: dict, undisturbed: Study
) -> None:
    study = Study(tmp_path, fields)
    run = subprocess.Popen(study.snakemake(), stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True)
    wait_until(lambda: orders_exist(study), run)
    second = study.run()
    assert second.returncode == 2
    assert f"snakemake as process {run.pid}" in second.stderr
    run.communicate(timeout=240)
    assert run.returncode == 0, "the live run was not disturbed"
    assert_equal_contents(study, undisturbed)


@pytest.mark.slow
@pytest.mark.parametrize("number", [signal.SIGKILL, signal.SIGINT, signal.SIGTERM])
@pytest.mark.parametrize("attempt", range(10))
def test_random_moments(
    number: signal.Signals, attempt: int, tmp_path: Path, fields: dict, undisturbed: Study
) -> None:
    """Up to three kills in a row, at random moments over the whole run, start-up and planning included."""
    moments = random.Random(1000 * number + attempt)
    study = Study(tmp_path, fields)
    for _ in range(moments.randint(1, 3)):
        run = study.start()
        time.sleep(moments.uniform(0.2, 12.0))
        kill(run, number)
    finish(study, undisturbed)
