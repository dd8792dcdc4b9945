"""`conetone calibrate` on a small sweep: refusal before the run, one real calibration, growth."""

import json
import subprocess

import pandas as pd
import pytest

from tests.workflow.conftest import CONETONE, PATIENCE, Study


def calibrate(study: Study, *options: str) -> subprocess.CompletedProcess:
    command = [*CONETONE, "calibrate", str(study.sweep_file), "--results", str(study.results), "--cores", "2"]
    return subprocess.run(
        [*command, *options], capture_output=True, text=True, timeout=PATIENCE, check=False,
        env=study.environment,
    )  # fmt: skip


def injections(study: Study) -> pd.DataFrame:
    frame = pd.read_parquet(study.home / "calibration")
    return frame.sort_values(["series", "truth", "injection"], ignore_index=True)


def test_a_sweep_that_has_not_been_run_is_one_clear_error(study: Study) -> None:
    refused = calibrate(study)
    assert refused.returncode == 2
    (line,) = refused.stderr.splitlines()
    assert "3 of 3 tables of spectra missing" in line
    assert f"conetone run {study.sweep_file}" in line
    assert not study.home.exists()


@pytest.mark.slow
def test_a_calibration_from_the_command_line(study: Study) -> None:
    study.fields |= {"sizes": [64, 90, 128, 181], "replicates": 6}
    study.compute("--quiet")
    done = calibrate(study, "--injections", "6", "--json")
    assert done.returncode in (0, 1), done.stderr
    outcome = json.loads(done.stdout)
    assert done.returncode == (1 if outcome["broken"] else 0)
    rows = pd.DataFrame(outcome["calibration"])
    assert (rows.injections + rows.failed)[~rows.truth.isin(["inside", "outside"])].eq(6).all()
    assert outcome["jobs_run"] == outcome["jobs"]
    assert (study.home / "figures" / "calibration.png").is_file()
    again = calibrate(study, "--injections", "6")
    assert "Nothing to do" in again.stdout
    assert "all inside" in again.stdout
    assert again.returncode == done.returncode


@pytest.mark.slow
def test_a_calibration_that_grows_computes_only_what_is_new(study: Study) -> None:
    study.compute("--quiet")
    assert calibrate(study, "--injections", "2", "--quiet").returncode in (0, 1)
    before = injections(study)
    assert calibrate(study, "--injections", "3", "--quiet").returncode in (0, 1)
    after = injections(study)
    kept = after[after.injection < 2].reset_index(drop=True)
    # the seconds among the columns are those of the first time
    pd.testing.assert_frame_equal(kept, before, check_exact=True)
    assert len(after) == 1.5 * len(before)
