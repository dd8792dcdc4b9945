"""From spectra to exponents with replicates missing: attempted and used are counted, nothing is dropped."""

import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest

from conetone.records.files import read_footer, read_rows, write_table
from conetone.records.tables import SPECTRA
from conetone.stages.aggregate import aggregate_sweep
from conetone.stages.diagonalise import diagonalise_block
from conetone.stages.fit import fit_series
from conetone.stages.sprinkle import sprinkle_block
from conetone.sweep.definition import resolve_sweep
from conetone.sweep.plan import Plan

SIZES = [64, 90, 128, 181]


def plan(**changes: object) -> Plan:
    fields = {
        "sweep": "closing",
        "root_seed": 5,
        "ensembles": [{"ensemble": "minkowski-diamond", "dimension": 2}],
        "sizes": SIZES,
        "replicates": 6,
        "operators": [{"matrix": "causal", "part": "antisymmetric"}],
    }
    return Plan(resolve_sweep({**fields, **changes}))


@pytest.fixture(autouse=True)
def _in_a_folder_of_its_own(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)


def spectra(of: Plan) -> None:
    for job in of.jobs["sprinkle"].values():
        sprinkle_block(job.request, job.outputs[0])
    for job in of.jobs["diagonalise"].values():
        diagonalise_block(job.request, job.inputs[0], job.outputs[0])


def close(of: Plan) -> list[dict]:
    for job in of.jobs["fit"].values():
        fit_series(job.request)
    aggregate_sweep(of.job("aggregate", "all").request)
    return read_rows(Path("exponents.parquet"))


def spoil(path: Path, replicates: set[int], **columns: object) -> None:
    rows = [{**row, **(columns if row["replicate"] in replicates else {})} for row in read_rows(path)]
    write_table(path, SPECTRA, rows, request=read_footer(path)["request"])


def of_size(of: Plan, size: int) -> Path:
    return next(job.outputs[0] for name, job in of.jobs["diagonalise"].items() if f"-n{size}-" in name)


def test_failed_replicates_are_counted_and_named() -> None:
    study = plan()
    spectra(study)
    spoil(of_size(study, 90), {1, 4}, status="failed", reason="MemoryError: no room", eigenvalues=None)
    (row,) = close(study)
    assert (row["replicates_used"], row["replicates_attempted"]) == (22, 24)
    assert row["status"] == "ok"
    assert "2 of 24 replicates failed: see status in spectra/" in row["warnings"]
    pairs = set(zip(row["copies_size"], row["copies_replicate"], strict=True))
    assert pairs == {(s, r) for s in SIZES for r in range(6)} - {(90, 1), (90, 4)}


def test_a_size_without_usable_spectra_is_left_out_with_a_reason() -> None:
    study = plan()
    spectra(study)
    spoil(of_size(study, 181), set(range(6)), status="failed", reason="killed", eigenvalues=None)
    (row,) = close(study)
    assert row["sizes"] == [64, 90, 128]
    assert row["exponent"] is not None
    assert row["replicates_used"] == 18
    reasons = {fit["reason"] for fit in read_rows(Path("fits.parquet")) if fit["size"] == 181}
    assert reasons == {"0 usable of 6 replicates; an error bar takes two"}


def test_one_replicate_gives_no_error_bar_and_says_so() -> None:
    study = plan(replicates=1)
    spectra(study)
    (row,) = close(study)
    assert (row["status"], row["exponent"]) == ("failed", None)
    assert row["reason"] == "no size has a fit: see fits.parquet"
    reasons = {fit["reason"] for fit in read_rows(Path("fits.parquet"))}
    assert reasons == {"1 usable of 1 replicates; an error bar takes two"}


def test_spectra_of_zeros_have_no_ranks() -> None:
    study = plan()
    spectra(study)
    for size in SIZES:
        spoil(of_size(study, size), set(range(6)), eigenvalues=[0.0] * size)
    (row,) = close(study)
    assert row["status"] == "failed"


def test_sizes_too_small_for_the_windows_say_so() -> None:
    study = plan(sizes=[6, 8, 12])
    spectra(study)
    (row,) = close(study)
    assert row["status"] == "failed"
    reasons = {fit["reason"] for fit in read_rows(Path("fits.parquet")) if fit["status"] == "failed"}
    assert len(reasons) > 1
    assert all("rank" in reason or "bins" in reason for reason in reasons)


def test_two_replicates_are_enough_for_a_number() -> None:
    study = plan(replicates=2)
    spectra(study)
    (row,) = close(study)
    assert row["status"] == "ok"
    assert np.isfinite([row["exponent"], row["statistical"], row["systematic"]]).all()


def test_poisson_counts_end_in_an_exponent_too() -> None:
    study = plan(count="poisson", replicates=8)
    spectra(study)
    (row,) = close(study)
    assert row["count"] == "poisson"
    total = np.hypot(row["statistical"], row["systematic"])
    assert abs(row["exponent"] - 1) < 3 * total


def test_pieces_of_a_dead_run_are_taken_up_only_if_they_answer_the_request() -> None:
    study = plan()
    spectra(study)
    close(study)
    (job,) = study.jobs["fit"].values()
    made = {path: path.read_bytes() for path in job.outputs}

    def set_aside() -> None:
        for path in job.outputs:
            waiting = Path("resume") / path
            waiting.parent.mkdir(parents=True, exist_ok=True)
            path.replace(waiting)

    set_aside()
    fit_series(job.request)
    assert {path: path.read_bytes() for path in job.outputs} == made, "moved back, not made again"
    set_aside()
    spoil(of_size(study, 90), {1}, status="failed", reason="x", eigenvalues=None)
    fit_series(job.request)
    assert any(path.read_bytes() != made[path] for path in job.outputs), "other spectra, other fits"


def test_job_commands_start_without_the_heavy_libraries() -> None:
    """Thousands of jobs start Python: only figures may load pandas, matplotlib, seaborn; none pydantic."""
    heavy = {"pandas", "matplotlib", "seaborn", "pydantic", "snakemake", "rich.progress"}
    for stage in ("sprinkle", "diagonalise", "fit", "aggregate"):
        code = (
            f"import sys, conetone.cli, conetone.stages.{stage}, conetone.sweep.requests; print(*sys.modules)"
        )
        loaded = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
        assert heavy.isdisjoint(loaded.stdout.split()), stage
