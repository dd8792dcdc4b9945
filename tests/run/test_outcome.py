"""What people read: values with their errors, durations, the messages of the lock."""

import subprocess
import sys
from pathlib import Path

import pytest
from rich.console import Console

from conetone.errors import LiveRunError
from conetone.figure.cells import format_value
from conetone.run import outcome
from conetone.run.lock import run_lock
from conetone.run.progress import duration


@pytest.mark.parametrize(
    ("value", "statistical", "systematic", "text"),
    [
        (0.6912, 0.0031, 0.0574, "0.691(3)(57)"),
        (0.9987, 0.0042, 0.0081, "0.9987(42)(81)"),
        (-0.0241, 0.0308, 0.0876, "-0.024(31)(88)"),
        (12.3, 1.2, 34.0, "12(1)(34)"),
        (0.5, 0.0, 0.0, "0.500000"),
        (0.75, 0.00996, 0.001, "0.750(10)(1)"),
        (None, None, None, "none"),
    ],
)
def test_values_with_their_errors(value, statistical, systematic, text: str) -> None:
    assert format_value(value, statistical, systematic) == text


def row(**changes: object) -> dict:
    return {
        **{"ensemble": "minkowski-diamond", "count": "fixed", "dimension": 3, "matrix": "causal"},
        **{"part": "symmetric", "exponent": 0.6912, "statistical": 0.0031, "systematic": 0.0574},
        **{"expected": 0.75, "expected_standing": "heuristic", "deviation": -1.02, "sizes": [256, 1024]},
        **{"replicates_used": 120, "replicates_attempted": 121, "replicates_failed": 1, "reason": None},
        **{"warnings": ["first"], **changes},
    }


@pytest.mark.parametrize("columns", [80, 124, 125, 200])
def test_the_closing_table_fits_the_terminal_and_loses_nothing(
    columns: int, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    console = Console(highlight=False, markup=False, width=columns)
    monkeypatch.setattr(outcome, "plain_console", lambda: console)
    rows = [row(), row(exponent=None, dimension=None, expected=None, reason="no fit", warnings=["first"])]
    outcome.print_table(outcome.Outcome("s", Path("/r/s"), rows, [], 9, 9, 0, 1, 3.0))
    said = capsys.readouterr().out
    assert max(len(line) for line in said.splitlines() if "Tables:" not in line) <= columns
    for words in ("minkowski-diamond, dimension 3", "0.691(3)(57)", "0.75 heuristic, -1.0 σ", "256…1024 (2)"):
        assert words in said
    for words in ("120/121", "[1] first", "[2] no fit", "none"):
        assert words in said


@pytest.mark.parametrize(
    ("seconds", "text"),
    [(0.4, "0 s"), (59.4, "59 s"), (59.6, "1 min 0 s"), (200, "3 min 20 s"), (7500, "2 h 5 min")],
)
def test_durations(seconds: float, text: str) -> None:
    assert duration(seconds) == text


def test_the_lock_names_its_holder_and_dies_with_it(tmp_path: Path) -> None:
    hold = (
        "import sys, time; from pathlib import Path; from conetone.run.lock import run_lock\n"
        f"with run_lock(Path({str(tmp_path)!r})): print('held', flush=True); time.sleep(60)"
    )
    holder = subprocess.Popen([sys.executable, "-c", hold], stdout=subprocess.PIPE, text=True)
    assert holder.stdout is not None
    holder.stdout.readline()
    with pytest.raises(LiveRunError, match=f"process {holder.pid} on "), run_lock(tmp_path):
        pass
    holder.kill()
    holder.communicate()
    with run_lock(tmp_path):
        pass


def test_a_read_only_results_folder_is_said_in_one_line(tmp_path: Path) -> None:
    blocked = tmp_path / "file"
    blocked.write_text("not a folder")
    with pytest.raises(Exception, match="cannot be written"), run_lock(blocked / "sweep"):
        pass


@pytest.mark.parametrize(
    "command", ["", "run", "expand", "sprinkle", "diagonalise", "fit", "aggregate", "figure"]
)
def test_help_fits_a_screen(command: str) -> None:
    words = [sys.executable, "-m", "conetone", *command.split(), "--help"]
    said = subprocess.run(words, capture_output=True, text=True, check=True).stdout
    assert len(said.splitlines()) <= 40
    assert max(len(line) for line in said.splitlines()) <= 100
