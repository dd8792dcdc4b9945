"""Block jobs in process: failures are rows, interrupted rows are taken up, damage is not believed."""

import os
import signal
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from conetone.errors import InterruptedRunError, TableError
from conetone.records.files import read_footer, read_rows, resume_path
from conetone.stages import block, diagonalise
from conetone.stages.diagonalise import diagonalise_block
from conetone.stages.sprinkle import sprinkle_block
from conetone.sweep.points import EnsembleChoice, Point
from conetone.sweep.requests import DiagonaliseRequest, SprinkleRequest
from conetone.sweep.settings import SpectrumSettings

POINT = Point(EnsembleChoice("minkowski-diamond", (("dimension", 2),), "fixed"), 40)
FULL = SpectrumSettings("full", None, None, "auto")
ORDERS, SPECTRA = Path("orders/block.parquet"), Path("spectra/block.parquet")


def sprinkle_request(stop: int = 5) -> SprinkleRequest:
    return SprinkleRequest(POINT, root_seed=1, first=0, stop=stop)


def diagonalise_request(stop: int = 5) -> DiagonaliseRequest:
    return DiagonaliseRequest(POINT, "causal", "symmetric", FULL, 0, stop)


@pytest.fixture(autouse=True)
def _in_a_folder_of_its_own(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)


@pytest.fixture
def orders() -> Path:
    sprinkle_block(sprinkle_request(), ORDERS)
    return ORDERS


def test_a_replicate_that_fails_is_a_row_with_a_reason(orders: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    solve, calls = diagonalise.full_spectrum, iter(range(5))

    def failing(matrix, part, **options):
        if next(calls) == 2:
            raise np.linalg.LinAlgError("no convergence")
        return solve(matrix, part, **options)

    monkeypatch.setattr(diagonalise, "full_spectrum", failing)
    diagonalise_block(diagonalise_request(), orders, SPECTRA)
    frame = pd.read_parquet(SPECTRA)
    assert frame.status.tolist() == ["ok", "ok", "failed", "ok", "ok"]
    assert frame.reason[2] == "LinAlgError: no convergence"
    assert frame.eigenvalues[2] is None


def test_a_failed_order_fails_its_spectrum(monkeypatch: pytest.MonkeyPatch) -> None:
    def out_of_memory(*arguments):
        raise MemoryError("no room")

    with monkeypatch.context() as patched:
        patched.setattr("conetone.stages.sprinkle.draw", out_of_memory)
        sprinkle_block(sprinkle_request(), ORDERS)
    diagonalise_block(diagonalise_request(), ORDERS, SPECTRA)
    frame = pd.read_parquet(SPECTRA)
    assert set(frame.status) == {"failed"}
    assert set(frame.reason) == {"no order: MemoryError: no room"}


def test_a_spectrum_that_breaks_a_sum_rule_is_suspect(orders: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    solve = diagonalise.full_spectrum

    def careless(matrix, part, **options):
        spectrum = solve(matrix, part, **options)
        return type(spectrum)(spectrum.eigenvalues * (1 + 1e-9), spectrum.solver)

    monkeypatch.setattr(diagonalise, "full_spectrum", careless)
    diagonalise_block(diagonalise_request(), orders, SPECTRA)
    frame = pd.read_parquet(SPECTRA)
    assert set(frame.status) == {"suspect"}
    assert frame.reason.str.startswith("a sum rule fails by more than ").all()


def test_a_bug_fails_the_job_and_writes_nothing(orders: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def broken(matrix, part, **options):
        raise ZeroDivisionError

    monkeypatch.setattr(diagonalise, "full_spectrum", broken)
    with pytest.raises(ZeroDivisionError):
        diagonalise_block(diagonalise_request(), orders, SPECTRA)
    assert not SPECTRA.exists()


@pytest.mark.parametrize("number", [signal.SIGTERM, signal.SIGINT])
def test_a_signal_keeps_finished_rows_and_the_next_job_takes_them_up(
    orders: Path, monkeypatch: pytest.MonkeyPatch, number: signal.Signals
) -> None:
    solve, calls = diagonalise.full_spectrum, iter(range(100))

    def interrupted(matrix, part, **options):
        if next(calls) == 3:
            os.kill(os.getpid(), number)
        return solve(matrix, part, **options)

    monkeypatch.setattr(diagonalise, "full_spectrum", interrupted)
    with pytest.raises(InterruptedRunError):
        diagonalise_block(diagonalise_request(), orders, SPECTRA)
    assert not SPECTRA.exists()
    kept = read_rows(resume_path(SPECTRA))
    assert [row["replicate"] for row in kept] == [0, 1, 2]
    diagonalise_block(diagonalise_request(), orders, SPECTRA)
    finished = read_rows(SPECTRA)
    assert finished[:3] == kept, "the rows themselves, their seconds included"
    assert [row["replicate"] for row in finished] == [0, 1, 2, 3, 4]
    assert not resume_path(SPECTRA).exists()


def test_an_output_outside_the_folder_of_the_sweep_stays(tmp_path: Path) -> None:
    output = tmp_path / "elsewhere.parquet"
    sprinkle_block(sprinkle_request(), output)
    assert len(read_rows(output)) == 5
    assert list(tmp_path.glob("**/*.parquet")) == [output]


def test_a_second_signal_does_not_cut_the_saving_short(orders: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    write, solve, calls = block.write_table, diagonalise.full_spectrum, iter(range(100))

    def interrupted(matrix, part, **options):
        if next(calls) == 3:
            os.kill(os.getpid(), signal.SIGTERM)
        return solve(matrix, part, **options)

    def disturbed(path, *arguments, **keywords):
        os.kill(os.getpid(), signal.SIGTERM)
        write(path, *arguments, **keywords)

    monkeypatch.setattr(diagonalise, "full_spectrum", interrupted)
    monkeypatch.setattr(block, "write_table", disturbed)
    with pytest.raises(InterruptedRunError):
        diagonalise_block(diagonalise_request(), orders, SPECTRA)
    assert [row["replicate"] for row in read_rows(resume_path(SPECTRA))] == [0, 1, 2]


def test_rows_are_put_aside_while_a_block_runs(orders: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(block, "SAVE_SECONDS", 0.0)
    seen = []
    solve = diagonalise.full_spectrum

    def watching(matrix, part, **options):
        waiting = resume_path(SPECTRA)
        seen.append(len(read_rows(waiting)) if waiting.exists() else 0)
        return solve(matrix, part, **options)

    monkeypatch.setattr(diagonalise, "full_spectrum", watching)
    diagonalise_block(diagonalise_request(), orders, SPECTRA)
    assert seen == [0, 1, 2, 3, 4]


def leave(rows_of: Path) -> None:
    resume_path(rows_of).parent.mkdir(parents=True, exist_ok=True)
    rows_of.replace(resume_path(rows_of))


def test_a_grown_block_takes_over_its_rows(orders: Path) -> None:
    before = read_rows(orders)
    leave(orders)
    sprinkle_block(sprinkle_request(stop=8), ORDERS)
    after = read_rows(ORDERS)
    assert after[:5] == before
    assert len(after) == 8


def test_leftovers_of_another_request_are_not_believed(orders: Path) -> None:
    leave(orders)
    sprinkle_block(SprinkleRequest(POINT, root_seed=2, first=0, stop=5), ORDERS)
    digests = {row["digest"] for row in read_rows(ORDERS)}
    sprinkle_block(sprinkle_request(), Path("orders/other.parquet"))
    assert digests.isdisjoint({row["digest"] for row in read_rows(Path("orders/other.parquet"))})


def test_spectra_of_other_orders_are_not_believed(orders: Path) -> None:
    diagonalise_block(diagonalise_request(), orders, SPECTRA)
    leave(SPECTRA)
    sprinkle_block(SprinkleRequest(POINT, root_seed=2, first=0, stop=5), ORDERS)
    diagonalise_block(diagonalise_request(), ORDERS, SPECTRA)
    assert [r["digest"] for r in read_rows(SPECTRA)] == [r["digest"] for r in read_rows(ORDERS)]


def test_a_damaged_leftover_is_passed_over(orders: Path, capsys: pytest.CaptureFixture[str]) -> None:
    leave(orders)
    resume_path(ORDERS).write_bytes(b"PAR1 nonsense PAR1")
    sprinkle_block(sprinkle_request(), ORDERS)
    assert len(read_rows(ORDERS)) == 5
    assert "not resumed" in capsys.readouterr().err


def test_an_order_that_is_not_the_one_its_digest_names_is_refused(orders: Path) -> None:
    from conetone.records.files import write_table
    from conetone.records.tables import ORDERS as TABLE

    rows = read_rows(orders)
    rows[3]["packed_relation"], rows[4]["packed_relation"] = (
        rows[4]["packed_relation"],
        rows[3]["packed_relation"],
    )
    write_table(orders, TABLE, rows, request=read_footer(orders)["request"])
    with pytest.raises(TableError, match="replicate 3: found digest"):
        diagonalise_block(diagonalise_request(), orders, SPECTRA)


def test_poisson_counts_scatter_and_an_empty_order_has_an_empty_spectrum() -> None:
    tiny = Point(EnsembleChoice("minkowski-diamond", (("dimension", 2),), "poisson"), 2)
    sprinkle_block(SprinkleRequest(tiny, root_seed=1, first=0, stop=40), ORDERS)
    diagonalise_block(DiagonaliseRequest(tiny, "causal", "antisymmetric", FULL, 0, 40), ORDERS, SPECTRA)
    orders, spectra = pd.read_parquet(ORDERS), pd.read_parquet(SPECTRA)
    assert orders.elements.min() == 0, "40 draws of mean 2: the chance of no 0 is 0.3 %"
    assert (spectra.status == "ok").all()
    assert [len(values) for values in spectra.eigenvalues] == orders.elements.tolist()
    assert orders.ordering_fraction[orders.elements < 2].isna().all()
