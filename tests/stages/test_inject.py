"""Injections in blocks: rows repeat, growth keeps them, and coverage collects what is there."""

import shutil
from dataclasses import replace
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from conetone.errors import RequestError
from conetone.records.files import read_rows
from conetone.run.growth import follow_the_calibration
from conetone.stages.coverage import collect_coverage
from conetone.stages.diagonalise import diagonalise_block
from conetone.stages.inject import inject_block
from conetone.stages.sprinkle import sprinkle_block
from conetone.sweep.calibration import Calibration
from conetone.sweep.definition import resolve_sweep
from conetone.sweep.plan import Plan
from conetone.sweep.requests import InjectRequest

SIZES = [64, 90, 128]


def plan(sizes: list[int] = SIZES) -> Plan:
    fields = {
        "sweep": "tiny",
        "root_seed": 5,
        "ensembles": [{"ensemble": "minkowski-diamond", "dimension": 3}],
        "sizes": sizes,
        "replicates": 4,
        "operators": [{"matrix": "causal", "part": "antisymmetric"}],
    }
    return Plan(resolve_sweep(fields))


def with_spectra(sizes: list[int] = SIZES) -> Plan:
    """A plan whose spectra stand in the current folder."""
    made = plan(sizes)
    for job in made.jobs["sprinkle"].values():
        sprinkle_block(job.request, job.outputs[0])
    for job in made.jobs["diagonalise"].values():
        diagonalise_block(job.request, job.inputs[0], job.outputs[0])
    return made


@pytest.fixture(autouse=True)
def _in_a_folder_of_its_own(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)


def inject(calibration: Calibration, *truths: str) -> list[dict]:
    """Run the jobs of these truths as the workflow would; all their rows."""
    follow_the_calibration(Path(), calibration)
    rows = []
    for job in calibration.jobs["inject"].values():
        if job.request.truth in truths:
            if not job.outputs[0].exists():
                inject_block(job.request, job.outputs[0])
            rows += read_rows(job.outputs[0])
    return rows


def test_more_injections_keep_those_there_are_and_fewer_bring_them_back() -> None:
    made = with_spectra()
    few = inject(Calibration(made, 2, seed=1), "top")
    assert [row["injection"] for row in few] == [0, 1]
    assert {row["status"] for row in few} == {"ok"}
    more = inject(Calibration(made, 3, seed=1), "top")
    # the seconds are those of the first time: nothing was computed again
    assert more[:2] == few
    assert len(more) == 3
    assert inject(Calibration(made, 2, seed=1), "top") == few
    assert len({row["true_exponent"] for row in more}) == 3


def test_seed_truth_and_number_choose_the_draw_and_nothing_else() -> None:
    made = with_spectra()
    first = inject(Calibration(made, 1, seed=1), "power", "top")
    shutil.rmtree("calibration")
    other = inject(Calibration(made, 1, seed=2), "power")
    exponents = [row["true_exponent"] for row in (*first, *other)]
    assert len(set(exponents)) == 3
    assert all(abs(x - exponents[0]) < 0.2 for x in exponents)


def test_blocks_do_not_depend_on_the_number_of_injections() -> None:
    made = plan()
    small, large = (Calibration(made, count, seed=1).jobs["inject"] for count in (5000, 5001))
    for name, job in small.items():
        request, longer = job.request, large[name].request
        assert isinstance(request, InjectRequest)
        assert request.first == longer.first
        assert request.stop == longer.stop or request.stop == 5000
    assert len(small) > len({job.request.truth for job in small.values()})


def test_a_series_without_an_exponent_gives_failed_rows_with_the_reason() -> None:
    rows = inject(Calibration(with_spectra(SIZES[:2]), 1, seed=1), "power")
    assert [row["status"] for row in rows] == ["failed"]
    assert "no exponent: 2 usable sizes" in rows[0]["reason"]


def test_a_request_of_other_code_is_refused() -> None:
    (request, *_) = (job.request for job in Calibration(plan(), 1, seed=1).jobs["inject"].values())
    text = request.text()
    assert InjectRequest.parse(text).text() == text
    with pytest.raises(RequestError):
        InjectRequest.parse(text.replace('"tested":[', '"tested":[9'))


def test_coverage_follows_from_the_rows() -> None:
    calibration = Calibration(with_spectra(), 2, seed=1)
    request = calibration.job("coverage", "all").request
    every = ("power", "drift")
    rows = pd.DataFrame(inject(calibration, *every))
    collect_coverage(replace(request, series=(replace(request.series[0], truths=every),)))
    table = pd.read_parquet("calibration.parquet").set_index(["estimator", "truth"])
    assert set(table.loc["smooth-count"].index) == {*every, "inside", "outside"}
    for (estimator, truth), found in table.iterrows():
        prefix = "" if found.quoted else "other_"
        assert found.quoted == (estimator == rows.estimator[0])
        mine = rows[rows.inside == found.inside if truth in ("inside", "outside") else rows.truth == truth]
        total = np.hypot(mine[f"{prefix}statistical"], mine[f"{prefix}systematic"])
        pulls = (mine[f"{prefix}exponent"] - mine.true_exponent) / total
        assert found.injections == len(mine)
        assert found.coverage_68 == pytest.approx((pulls.abs() <= 1).mean())
        assert found.coverage_95 == pytest.approx((pulls.abs() <= 2).mean())
        assert found.bias == pytest.approx(pulls.mean())
        assert found["width"] == pytest.approx(total.mean())
        assert sum(found.pit) == len(mine)
    drawn = pd.read_csv("figures/calibration.csv")
    assert set(drawn[drawn.layer == "coverage"].truth) == {*every, "inside", "outside"}
    assert Path("figures/calibration.pdf").stat().st_size > 0
