"""Whole runs: the contract of the results, idle reruns, growth, and the two ways to start."""

import json
import os
import re
import subprocess
import sys
import time
from pathlib import Path

import pandas as pd
import pyarrow.parquet as pq
import pytest

from conetone.sweep.definition import load_sweep
from conetone.sweep.plan import Plan
from tests.workflow.conftest import CONETONE, UP_TO_AGGREGATE, Study, assert_equal_contents

CONTRACT = {
    "orders": "ensemble dimension size replicate elements relations links height ordering_fraction digest"
    " status",
    "spectra": "ensemble dimension size replicate matrix part eigenvalues sum_defect square_sum_defect solver"
    " seconds status",
    "exponents.parquet": "ensemble dimension matrix part exponent statistical systematic reduced_chi2 sizes"
    " replicates_used replicates_attempted expected expected_standing",
    "fits.parquet": "ensemble dimension matrix part size window model exponent statistical weight copies",
}


@pytest.fixture(scope="module")
def finished(tmp_path_factory: pytest.TempPathFactory) -> Study:
    """A finished sweep of two ensembles, one without a dimension, and three operators."""
    study = Study(
        tmp_path_factory.mktemp("finished"),
        {
            "sweep": "contract",
            "root_seed": 3,
            "ensembles": [
                {"ensemble": "minkowski-diamond", "dimension": 2},
                {"ensemble": "kleitman-rothschild"},
            ],
            "sizes": [64, 90, 128],
            "replicates": 5,
            "operators": [
                {"matrix": "causal", "part": ["antisymmetric", "symmetric"]},
                {"matrix": "link", "part": "symmetric"},
            ],
        },
    )
    study.run_well()
    return study


@pytest.mark.parametrize("table", CONTRACT)
def test_contract_columns(finished: Study, table: str) -> None:
    frame = pd.read_parquet(finished.home / table)
    assert set(CONTRACT[table].split()) <= set(frame.columns)


def test_datasets_read_as_one_frame_with_null_where_there_is_no_dimension(finished: Study) -> None:
    orders = pd.read_parquet(finished.home / "orders")
    assert len(orders) == 2 * 3 * 5
    without = orders[orders.ensemble == "kleitman-rothschild"]
    assert without.dimension.isna().all()
    assert (orders[orders.ensemble == "minkowski-diamond"].dimension == 2).all()
    spectra = pd.read_parquet(finished.home / "spectra")
    assert len(spectra) == 2 * 3 * 5 * 3
    assert (spectra.status == "ok").all()
    assert all((values[1:] >= values[:-1]).all() for values in spectra.eigenvalues)


def test_spectra_belong_to_the_orders_and_obey_the_sum_rules(finished: Study) -> None:
    orders = pd.read_parquet(finished.home / "orders").set_index(["point", "replicate"])
    for row in pd.read_parquet(finished.home / "spectra").itertuples():
        order = orders.loc[(row.point, row.replicate)]
        assert row.digest == order.digest
        pairs = order.relations if row.matrix == "causal" else order.links
        assert row.eigenvalues.sum() == pytest.approx(0, abs=1e-9)
        assert (row.eigenvalues**2).sum() == pytest.approx(2 * pairs, rel=1e-11)
        assert row.square_sum_defect < 1e-11


def test_every_series_ends_in_one_exponent(finished: Study) -> None:
    exponents = pd.read_parquet(finished.home / "exponents.parquet")
    assert len(exponents) == 2 * 3
    assert (exponents.status == "ok").all()
    assert (exponents.replicates_used == exponents.replicates_attempted).all()
    exact = exponents[exponents.expected_standing == "exact"]
    assert exact[["ensemble", "part", "expected"]].to_numpy().tolist() == [
        ["minkowski-diamond", "antisymmetric", 1.0],
        ["minkowski-diamond", "symmetric", 1.0],
    ]
    assert all(
        len(row.copies) == len(row.copies_size) == row.replicates_used for row in exponents.itertuples()
    )


def test_weights_of_windows_and_models_sum_to_one(finished: Study) -> None:
    fits = pd.read_parquet(finished.home / "fits.parquet")
    quoted = fits[(fits.estimator == "smooth-count") & (fits.model != "average")]
    for _, of_size in quoted.groupby(["series", "size"]):
        assert of_size.weight.sum() == pytest.approx(1)


def test_running_again_computes_nothing_and_says_so_quickly(finished: Study) -> None:
    before = finished.stamps("orders", "spectra", "pieces", ".")
    start = time.monotonic()
    again = finished.run()
    seconds = time.monotonic() - start
    assert again.returncode == 0, again.stderr
    assert "Nothing to do: all " in again.stdout
    assert seconds < 10  # a promise of the README; about 4 s alone on a machine
    assert finished.stamps("orders", "spectra", "pieces", ".") == before


def test_piped_output_is_plain_text(finished: Study) -> None:
    said = finished.run().stdout
    assert "\x1b" not in said
    assert re.search("^causal antisymmetric", said, re.MULTILINE)
    assert re.search(
        r"^ minkowski-diamond, dimension 2 +[0-9.]+\([0-9]+\)\([0-9]+\) +1 exact", said, re.MULTILINE
    )
    assert "1 exact" in said
    assert str(finished.home / "figures") in said


def test_quiet_says_nothing(finished: Study) -> None:
    done = finished.run("--quiet")
    assert (done.returncode, done.stdout, done.stderr) == (0, "", "")


def test_json_says_everything(finished: Study) -> None:
    outcome = finished.run_well()
    assert outcome["sweep"] == "contract"
    assert len(outcome["exponents"]) == 6
    assert {"exponent", "statistical", "systematic", "warnings"} <= set(outcome["exponents"][0])
    assert outcome["jobs_run"] == 0


def test_dry_run_shows_snakemakes_own_words(finished: Study) -> None:
    done = finished.run("--", "-n")
    assert done.returncode == 0
    assert "Nothing to be done" in done.stdout + done.stderr


def test_options_that_snakemake_does_not_know(finished: Study) -> None:
    done = finished.run("--", "--no-such-option")
    assert done.returncode == 2
    assert "no-such-option" in done.stderr


def test_plain_snakemake_on_one_core_gives_the_same_tables(finished: Study, tmp_path) -> None:
    other = Study(tmp_path, finished.fields)
    done = subprocess.run(
        other.snakemake("--until", "aggregate", "--cores", "1"),
        capture_output=True,
        text=True,
        timeout=240,
        check=False,
    )
    assert done.returncode == 0, done.stderr
    assert_equal_contents(finished, other)
    assert other.compute()["jobs_run"] == 0, "conetone run takes over what plain snakemake made"


def test_plain_snakemake_refuses_a_faulty_sweep_in_our_words(study: Study) -> None:
    study.fields["ensembles"][0]["dimension"] = 9
    done = subprocess.run(study.snakemake(), capture_output=True, text=True, timeout=240, check=False)
    assert done.returncode == 1
    assert "ensembles[0].dimension: found 9; allowed: a whole number from 2 to 7" in done.stderr
    assert not study.home.exists()


def test_growth_computes_only_what_is_new(study: Study) -> None:
    study.compute()
    old = study.stamps("orders", "spectra")

    study.fields["sizes"].append(180)
    grown = study.compute()
    assert grown["jobs_run"] == 1 + 1 + 1 + 1  # sprinkle, diagonalise, fit, aggregate
    assert old.items() <= study.stamps("orders", "spectra").items()
    old = study.stamps("orders", "spectra")

    study.fields["operators"].append({"matrix": "link", "part": "antisymmetric"})
    grown = study.compute()
    assert grown["jobs_run"] == 0 + 4 + 1 + 1
    assert old.items() <= study.stamps("orders", "spectra").items()
    old = study.stamps("orders", "spectra")

    study.fields["ensembles"].append({"ensemble": "kleitman-rothschild"})
    grown = study.compute()
    assert grown["jobs_run"] == 4 + 8 + 2 + 1
    assert old.items() <= study.stamps("orders", "spectra").items()


def test_more_replicates_compute_only_the_new_ones(study: Study) -> None:
    study.compute()
    before = study.rows_computed()
    study.fields["replicates"] = 7
    study.compute()
    after = study.rows_computed()
    assert len(after) == 7 * 3 * 2
    assert before.items() <= after.items()
    fresh = Study(study.folder / "fresh", study.fields)
    fresh.folder.mkdir()
    fresh.compute()
    assert_equal_contents(study, fresh)


def test_removing_hides_and_loses_nothing(study: Study) -> None:
    study.compute()
    whole, stamps = study.contents(), study.stamps("orders", "spectra")
    sizes = study.fields["sizes"]
    study.fields["sizes"] = [*sizes[:2], 181]
    study.compute()
    assert set(pd.read_parquet(study.home / "orders")["size"]) == {64, 90, 181}
    study.fields["sizes"] = sizes
    again = study.compute()
    assert again["jobs_run"] == 1 + 1, "only fit and aggregate"
    assert study.stamps("orders", "spectra") == stamps
    for name, frame in study.contents().items():
        pd.testing.assert_frame_equal(frame, whole[name], check_exact=True, obj=name)


def test_stopping_early_by_snakemakes_own_option(study: Study) -> None:
    done = study.run("--", "--until", "sprinkle")
    assert done.returncode == 0, done.stderr
    assert "3 jobs run" in done.stdout
    assert "The options given stop early: 6 jobs are still to do." in done.stdout
    again = study.run("--", "--until", "sprinkle")
    assert "Nothing to do" not in again.stdout
    assert "6 jobs are still to do" in again.stdout


def test_stopping_early_loses_no_row_of_a_growing_sweep(study: Study) -> None:
    study.compute()
    before = study.rows_computed()
    study.fields["replicates"] = 7
    assert study.run("--", "--until", "sprinkle").returncode == 0
    study.compute()
    after = study.rows_computed()
    assert before.items() <= after.items()
    assert not list((study.home / "resume").rglob("*.parquet"))


def test_options_that_would_redirect_the_sweep_are_refused(study: Study) -> None:
    for option in ("--config", "--configfile=x", "-C", "--directory", "-d", "-sSnakefile"):
        done = study.run("--", option)
        assert done.returncode == 2
        assert done.stderr.startswith(f"conetone: options after --: found {option}; allowed: ")
        assert not study.home.exists()


def test_blas_has_one_thread_whatever_snakemake_grants(study: Study) -> None:
    done = study.run("--", "--set-threads", "diagonalise=2", *UP_TO_AGGREGATE[1:])
    assert done.returncode == 0, done.stderr
    assert set(pd.read_parquet(study.home / "spectra")["threads"]) == {1}


def test_a_size_too_small_for_the_windows_is_left_out_and_not_a_failure(study: Study) -> None:
    study.fields["sizes"] = [8, 64, 90, 128]
    (row,) = study.compute()["exponents"]
    assert row["sizes"] == [64, 90, 128]
    assert (row["replicates_used"], row["replicates_failed"], row["replicates_attempted"]) == (12, 0, 16)
    assert "sizes without a fit are left out: 8; the reasons stand in fits.parquet" in row["warnings"]


def test_a_new_window_refits_and_computes_no_spectrum(study: Study) -> None:
    study.compute()
    old = study.stamps("orders", "spectra")
    study.fields["windows"] = {"to": ["0.25 * n^0.75", "0.3 * n^0.75"]}
    assert study.compute()["jobs_run"] == 1 + 1
    assert study.stamps("orders", "spectra") == old


def test_a_faulty_sweep_writes_nothing(study: Study) -> None:
    study.fields["sizes"] = [64, 0]
    done = study.run()
    assert done.returncode == 2
    assert done.stderr.startswith("conetone: ")
    assert "sizes[1]: found 0; allowed: " in done.stderr
    assert len(done.stderr.splitlines()) == 1
    assert not study.results.exists()


def test_a_damaged_table_is_named_and_a_rerun_mends_it(study: Study) -> None:
    study.run_well()
    victim = next(study.home.glob("spectra/*.parquet"))
    group = pq.read_metadata(victim).row_group(0)
    chunks = [group.column(i) for i in range(group.num_columns)]
    eigenvalues = next(chunk for chunk in chunks if chunk.path_in_schema.startswith("eigenvalues"))
    data = bytearray(victim.read_bytes())
    data[eigenvalues.data_page_offset + eigenvalues.total_compressed_size // 2] ^= 0x10
    victim.write_bytes(data)
    study.fields["windows"] = {"bins": 11}  # a change that reads the spectra again
    done = study.run()
    assert done.returncode == 1
    assert victim.name in done.stderr
    assert "delete it and run the sweep again" in done.stderr
    stale = pd.read_parquet(study.home / "exponents.parquet")
    victim.unlink()
    study.run_well()
    frame = pd.read_parquet(victim)
    assert frame.status.tolist() == ["ok"] * 4
    mended = pd.read_parquet(study.home / "exponents.parquet")
    assert mended.exponent[0] != stale.exponent[0], (
        "the old windows' exponent is not passed off as the new one"
    )


def test_fewer_than_three_sizes_is_said_not_guessed(study: Study) -> None:
    study.fields["sizes"] = [64, 90]
    outcome = study.run_well()
    (row,) = outcome["exponents"]
    assert row["exponent"] is None
    assert row["reason"] == "2 usable sizes; extrapolation takes 3"
    assert all(
        (study.home / "figures" / f"exponents{suffix}").is_file() for suffix in (".pdf", ".png", ".csv")
    )


def test_expand_prints_points_series_jobs_before_anything_runs(study: Study) -> None:
    command = [*CONETONE, "expand", str(study.sweep_file), "--results", str(study.results)]
    text = subprocess.run(command, capture_output=True, text=True, timeout=60, check=True).stdout
    assert "3 points, 1 series, sizes 64, 90, 128" in text
    parsed = json.loads(
        subprocess.run([*command, "--json"], capture_output=True, text=True, timeout=60, check=True).stdout
    )
    assert [point["size"] for point in parsed["points"]] == [64, 90, 128]
    assert {stage: jobs["count"] for stage, jobs in parsed["jobs"].items()} == {
        "sprinkle": 3, "diagonalise": 3, "fit": 1, "aggregate": 1, "figure": 1,
    }  # fmt: skip
    assert not study.results.exists()


def test_snakemake_plans_what_the_plan_says(study: Study) -> None:
    done = subprocess.run(
        study.snakemake("-n", "--quiet", "rules"), capture_output=True, text=True, timeout=60, check=True
    )
    jobs = Plan(load_sweep(study.sweep_file)).all_jobs
    assert re.search(rf"^total +{len(jobs) + 1}$", done.stdout, re.MULTILINE), done.stdout


def test_lint_is_clean(study: Study) -> None:
    done = subprocess.run(study.snakemake("--lint"), capture_output=True, text=True, timeout=60, check=False)
    assert done.returncode == 0, done.stderr
    assert "good condition" in done.stderr


def test_an_installed_wheel_runs_outside_a_clone(study: Study, tmp_path) -> None:
    clone = Path(__file__).parents[2]
    target = tmp_path / "installed"
    pip = [sys.executable, "-m", "pip", "install", "--quiet", "--no-deps", "--disable-pip-version-check"]
    subprocess.run([*pip, "--target", str(target), str(clone)], check=True, timeout=240, capture_output=True)
    environment = {**os.environ, "PYTHONPATH": str(target)}
    done = subprocess.run(
        study.command("--json"),
        cwd=tmp_path,
        env=environment,
        capture_output=True,
        text=True,
        timeout=240,
        check=False,
    )
    assert done.returncode == 0, done.stderr
    assert len(json.loads(done.stdout)["exponents"]) == 1
    (log,) = (study.home / "logs" / "run").glob("*.log")
    assert str(target / "conetone" / "workflow" / "profiles" / "default") in log.read_text()
