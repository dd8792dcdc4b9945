"""`conetone allocate`: what it reads of a pilot, what it prints, and what it refuses."""

import json
import subprocess
import sys
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import pyarrow as pa
import pytest
import yaml
from rich.console import Console

from conetone.aggregate.resample import variance_of_copies
from conetone.errors import SweepError, UsageError
from conetone.records.files import write_table
from conetone.records.tables import EXPONENTS, FITS, ORDERS, SPECTRA, Table
from conetone.run import allocation
from conetone.run.allocation import print_allocation
from conetone.run.pilot import read_pilot
from conetone.sprinkle.catalogue import PARAMETER_NAMES
from conetone.sweep.cost import START_SECONDS
from conetone.sweep.definition import load_sweep
from conetone.sweep.plan import Plan

SIZES = [64, 128, 256, 512, 1024]
FIELDS: dict[str, Any] = {
    "sweep": "piloted",
    "root_seed": 1,
    "ensembles": [{"ensemble": "minkowski-diamond", "dimension": [2, 3]}],
    "sizes": SIZES,
    "replicates": 12,
    "operators": [{"matrix": "causal", "part": ["symmetric", "antisymmetric"]}],
    "spectrum": {"extent": "full"},
}
# Seconds of an order and of a spectrum of n = 64; both grow as n³.
ORDER, SPECTRUM = 0.001, 0.01


def filled(table: Table, given: Mapping[str, Any]) -> dict[str, Any]:
    """A row with these values; other columns are null, or zero where they must not be."""
    zero = {pa.string(): "", pa.int64(): 0, pa.float64(): 0.0}
    blank = {c.name: None if c.nullable else zero.get(c.type, []) for c in table.columns}
    return {**blank, **{name: value for name, value in given.items() if name in blank}}


@dataclass
class Study:
    """A sweep file beside the tables of its pilot, drawn from a linear chain."""

    file: Path
    results: Path

    @property
    def folder(self) -> Path:
        return self.results / "piloted"

    def write(self, **changes: Any) -> None:
        self.file.write_text(yaml.safe_dump({**FIELDS, **changes}))

    def plan(self) -> Plan:
        return Plan(load_sweep(self.file))

    def pilot(self, used: int = 12, change: Callable[[dict[str, Any]], None] = lambda row: None) -> None:
        """Write every table that the command reads."""
        generator, plan = np.random.default_rng(3), self.plan()
        exponents, fits = [], []
        for s, series in enumerate(plan.series):
            sizes = np.repeat(SIZES, used)
            copies = 0.75 + generator.normal(0, 1e-2 * (sizes / 64) ** 0.3) / used
            row = {
                **series.key_columns(PARAMETER_NAMES),
                **{"exponent": 0.75, "systematic": 0.002 * (1 + s), "status": "ok", "reason": None},
                **{"statistical": float(np.sqrt(variance_of_copies(copies, [used] * 5)))},
                **{"copies": copies.tolist(), "copies_size": sizes.tolist()},
                "copies_replicate": list(range(used)) * 5,
            }
            change(row)
            exponents.append(filled(EXPONENTS, row))
            counts = {"replicates_used": used, "replicates_attempted": 12}
            fits += [filled(FITS, {**row, **counts, "size": size}) for size in SIZES]
        write_table(self.folder / "exponents.parquet", EXPONENTS, exponents, request="")
        write_table(self.folder / "fits.parquet", FITS, fits, request="")
        for stage, table, each in (("sprinkle", ORDERS, ORDER), ("diagonalise", SPECTRA, SPECTRUM)):
            for job in plan.jobs[stage].values():
                first, stop = json.loads(job.request.text())["replicates"]
                seconds = each * (json.loads(job.request.text())["point"]["size"] / 64) ** 3
                rows = [
                    # two halves that differ, so that only their mean is right
                    filled(table, {"replicate": r, "status": "ok", "seconds": seconds * (0.5 + r % 2)})
                    for r in range(first, stop)
                ]
                write_table(self.folder / job.outputs[0], table, rows, request=job.request.text())

    def json(self, capsys: pytest.CaptureFixture[str], target=None, budget=None, floor=8):
        """Exit code and what is printed."""
        code = print_allocation(self.file, self.results, target, budget, floor, as_json=True)
        return code, json.loads(capsys.readouterr().out)


@pytest.fixture
def study(tmp_path: Path) -> Study:
    made = Study(tmp_path / "piloted.yaml", tmp_path / "results")
    made.write()
    return made


def test_a_target_is_reached_with_what_it_costs(study: Study, capsys: pytest.CaptureFixture[str]) -> None:
    study.pilot()
    code, said = study.json(capsys, target=0.0085)
    assert code == 0
    assert said["sizes"] == SIZES
    assert min(said["replicates"]) >= 12
    assert said["done"] == [12] * 5
    assert said["to_compute"] == [m - 12 for m in said["replicates"]]
    # two ensembles, each one order and two operators of it; the twelve replicates of a block take their mean
    of_one = 2 * (ORDER + 2 * SPECTRUM) * (np.array(SIZES) / 64) ** 3
    np.testing.assert_allclose(said["core_seconds_of_one"], of_one, rtol=0.1)
    np.testing.assert_allclose(said["core_seconds_of_one"][0], of_one[0], rtol=1e-9)
    assert said["cost_source"] == ["measured"] * 5
    used, still = np.array(said["replicates"]), np.array(said["to_compute"])
    assert said["core_hours"] == pytest.approx(used @ said["core_seconds_of_one"] / 3600)
    assert said["core_hours_to_compute"] == pytest.approx(still @ said["core_seconds_of_one"] / 3600)
    for series in said["series"]:
        assert series["reachable"]
        assert series["total"] == pytest.approx(np.hypot(series["systematic"], series["statistical"]))
        assert series["total"] <= 0.0085 * (1 + 1e-6)
        assert series["total_ratio"] == pytest.approx(series["equal_total"] / series["total"])
    assert max(series["total"] for series in said["series"]) > 0.98 * 0.0085


def test_a_budget_is_kept_and_buys_what_the_reverse_target_costs(
    study: Study, capsys: pytest.CaptureFixture[str]
) -> None:
    study.pilot()
    code, said = study.json(capsys, budget="5h")
    assert code == 0
    assert 4.9 < said["core_hours"] <= 5
    largest = max(series["total"] for series in said["series"])
    _, back = study.json(capsys, target=largest)
    assert back["core_hours"] == pytest.approx(5, rel=0.05)
    _, more = study.json(capsys, budget="0.5d")
    assert max(series["total"] for series in more["series"]) < largest
    _, floored = study.json(capsys, budget="5h", floor=40)
    assert min(floored["replicates"]) >= 40


def test_what_is_out_of_reach_is_said_and_the_rest_is_served(
    study: Study, capsys: pytest.CaptureFixture[str]
) -> None:
    study.pilot()
    # systematic errors 0.002, 0.004, 0.006, 0.008
    assert print_allocation(study.file, study.results, 0.0065, None, 8, as_json=False) == 1
    said = " ".join(capsys.readouterr().out.split())
    assert "minkowski-diamond, dimension 3, causal antisymmetric (out of reach)" in said
    assert "no number of replicates reaches 0.0065 at these sizes" in said
    assert "larger sizes are what it takes" in said
    assert "a total error above 0.008" in said
    assert "replicates: [" in said
    assert print_allocation(study.file, study.results, 0.001, None, 8, as_json=False) == 1
    said = capsys.readouterr().out
    assert said.count("no number of replicates") == 4
    assert "replicates: [" not in said


@pytest.mark.parametrize("columns", [60, 80, 120, 200])
def test_text_fits_the_terminal_and_can_be_pasted(
    columns: int, study: Study, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    study.pilot()
    console = Console(highlight=False, markup=False, width=columns)
    monkeypatch.setattr(allocation, "plain_console", lambda: console)
    assert print_allocation(study.file, study.results, 0.0085, None, 8, as_json=False) == 0
    said = capsys.readouterr().out
    assert max(len(line) for line in said.splitlines()) <= columns
    pasted = "\n".join(line.strip() for line in said.splitlines() if line.startswith(("  sizes:", "  repl")))
    given = yaml.safe_load(pasted)
    assert given["sizes"] == SIZES
    study.write(**given)
    assert list(study.plan().sweep.replicates) == given["replicates"]
    for words in ("measured", "core-hours", "minkowski-diamond, dimension 2, causal symmetric", "Equal: "):
        assert words in said
    # with the replicates pasted, the pilot's count as done and the advice stays
    again, after = study.json(capsys, target=0.0085)
    assert again == 0
    assert after["done"] == [12] * 5
    assert after["replicates"] == given["replicates"]


def test_costs_without_tables_are_forecasts_and_said_to_be(
    study: Study, capsys: pytest.CaptureFixture[str]
) -> None:
    study.pilot()
    plan = study.plan()
    for stage, pattern in (
        ("sprinkle", "*n1024*"),
        ("diagonalise", "*n1024*"),
        ("diagonalise", "*n64-*.*-sym*"),
    ):
        for path in (study.folder / {"sprinkle": "orders", "diagonalise": "spectra"}[stage]).glob(pattern):
            path.unlink()
    _, said = study.json(capsys, target=0.0085)
    assert said["cost_source"] == ["partly forecast", "measured", "measured", "measured", "forecast"]
    assert said["done"] == [0, 12, 12, 12, 0]
    jobs = [job for stage in ("sprinkle", "diagonalise") for name, job in plan.jobs[stage].items()
            if "n1024" in name]  # fmt: skip
    forecast = sum(job.seconds - START_SECONDS for job in jobs) / 12
    assert said["core_seconds_of_one"][-1] == pytest.approx(forecast)


def test_nothing_is_left_to_compute_where_the_pilot_is_enough(
    study: Study, capsys: pytest.CaptureFixture[str]
) -> None:
    study.pilot()
    code, said = study.json(capsys, target=0.5)
    assert (code, said["replicates"], said["core_hours_to_compute"]) == (0, [12] * 5, 0)
    assert any("Nothing is left to compute" in note for note in said["notes"])


def test_failed_replicates_are_expected_again(study: Study) -> None:
    study.pilot()
    whole = read_pilot(study.plan(), study.folder, 8, "")
    expected = [row["statistical"] for row in whole.rows]
    # smoothing across sizes moves the pilot's own error by less than its uncertainty
    np.testing.assert_allclose(whole.design.statistical(np.full(5, 12)), expected, rtol=0.3)
    study.pilot(used=10)
    fewer = read_pilot(study.plan(), study.folder, 8, "")
    expected = [row["statistical"] for row in fewer.rows]
    np.testing.assert_allclose(fewer.design.statistical(np.full(5, 12)), expected, rtol=0.3)


def test_series_without_an_exponent_are_left_out_with_their_reason(
    study: Study, capsys: pytest.CaptureFixture[str]
) -> None:
    def fail(row: dict[str, Any]) -> None:
        if row["dimension"] == 3:
            row.update(status="failed", reason="no window fits", copies=None, exponent=None)
            row.update(systematic=None, statistical=None)

    study.pilot(change=fail)
    code, said = study.json(capsys, target=0.0085)
    assert code == 1
    assert len(said["series"]) == 2
    assert set(said["left_out"].values()) == {"no window fits"}
    assert print_allocation(study.file, study.results, 0.0085, None, 8, as_json=False) == 1
    assert "Left out, without an exponent" in capsys.readouterr().out


@pytest.mark.parametrize(
    ("target", "budget", "message"),
    [
        (None, None, "--target and --budget: found neither; allowed: exactly one"),
        (0.01, "1h", "found both"),
        (0.0, None, "--target: found 0.0; allowed: a total error above zero"),
        (-1.0, None, "--target: found -1.0"),
        (float("nan"), None, "--target: found nan"),
        (None, "forty", "--budget: found 'forty'; allowed: core time above zero; such as 90m, 40h or 2d"),
        (None, "40", "--budget: found '40'"),
        (None, "0h", "--budget: found '0h'"),
        (None, "-3h", "--budget: found '-3h'"),
        (None, "1m", "the fewest replicates take"),
    ],
)
def test_options_that_say_nothing_clear_are_refused(study: Study, target, budget, message: str) -> None:
    study.pilot()
    with pytest.raises(UsageError) as caught:
        print_allocation(study.file, study.results, target, budget, 8, as_json=False)
    assert message in str(caught.value)
    assert caught.value.exit_code == 2


def test_pilots_that_cannot_tell_are_refused(study: Study) -> None:
    def refused(message: str) -> None:
        with pytest.raises(UsageError, match=message):
            print_allocation(study.file, study.results, 0.01, None, 8, as_json=False)

    refused("no results yet.*run `conetone run .*piloted.yaml --results .*` first")
    study.pilot(used=1)
    refused("1 usable of 12 replicates at size 64 .*at least two")
    study.pilot(change=lambda row: row.update(status="failed", reason="no window fits", copies=None))
    refused("no exponent .*no window fits")
    study.pilot()
    study.write(sizes=[*SIZES, 2048])
    refused("results of other series or sizes")
    study.write(operators=[{"matrix": "link", "part": "symmetric"}])
    refused("results of other series or sizes")
    study.file.write_text("sweep: [")
    with pytest.raises(SweepError):
        print_allocation(study.file, study.results, 0.01, None, 8, as_json=False)


def test_the_command_line_explains_in_one_line(study: Study) -> None:
    words = [sys.executable, "-m", "conetone", "allocate", str(study.file), "--results", str(study.results)]
    done = subprocess.run([*words, "--target", "0.01"], capture_output=True, text=True, check=False)
    assert done.returncode == 2
    assert done.stderr.startswith("conetone: ")
    assert len(done.stderr.splitlines()) == 1
    study.pilot()
    done = subprocess.run([*words, "--target", "0.0065"], capture_output=True, text=True, check=False)
    assert done.returncode == 1
    assert "larger sizes are what it takes" in " ".join(done.stdout.split())
    assert done.stderr == ""
