"""Jobs: what a change of the spectrum asks for again, and how many threads a job takes."""

from typing import Any, get_args

import pytest

from conetone.diagonalise import full
from conetone.errors import RequestError
from conetone.operators.catalogue import PARTS
from conetone.sweep import cost
from conetone.sweep.definition import resolve_sweep
from conetone.sweep.plan import MANY_ELEMENTS, MANY_THREADS, Plan
from conetone.sweep.points import EnsembleChoice, OperatorChoice, Point
from conetone.sweep.requests import DiagonaliseRequest, SprinkleRequest
from conetone.sweep.settings import Solver, SpectrumSettings


def plan(**changes: Any) -> Plan:
    fields = {
        "sweep": "jobs",
        "root_seed": 1,
        "ensembles": [{"ensemble": "minkowski-diamond", "dimension": [2, 4]}],
        "sizes": [500, 1000, 2000],
        "replicates": 2,
        "operators": [{"matrix": "causal", "part": ["symmetric", "antisymmetric"]}],
        "windows": {"from": "0.2 * n^0.5", "to": "0.5 * n^0.5"},
    }
    return Plan(resolve_sweep({**fields, **changes}))


def asked(plan: Plan, stage: str) -> dict[str, str]:
    return {name: job.request.text() for name, job in plan.jobs[stage].items()}


@pytest.mark.parametrize(
    "spectrum",
    [
        {"extent": "leading", "count": 40},
        {"extent": "leading", "count": 30, "tolerance": 1e-8},
        {"extent": "full"},
        {"extent": "full", "solver": "lapack"},
    ],
)
def test_other_eigenvalues_ask_for_spectra_again_and_for_no_order(spectrum: dict[str, Any]) -> None:
    before, after = plan(spectrum={"extent": "leading", "count": 30}), plan(spectrum=spectrum)
    assert asked(before, "sprinkle") == asked(after, "sprinkle")
    spectra, others = asked(before, "diagonalise"), asked(after, "diagonalise")
    assert spectra.keys() == others.keys()
    assert all(text != others[name] for name, text in spectra.items())


def test_what_auto_decides_alike_is_not_asked_for_again() -> None:
    large = {"extent": "auto", "count": 45}
    before, after = plan(spectrum={"extent": "auto", "count": 22}), plan(spectrum=large)
    differing = {
        before.jobs["diagonalise"][name].request.point.size
        for name, text in asked(before, "diagonalise").items()
        if text != asked(after, "diagonalise")[name]
    }
    unlike = {n for n in before.spectra if before.spectra[n] != after.spectra[n]}
    assert differing == unlike
    assert asked(plan(spectrum=large), "diagonalise") == asked(after, "diagonalise")


def test_requests_come_back_from_their_text() -> None:
    for each in ("full", "auto"):
        for job in plan(spectrum={"extent": each}).jobs["diagonalise"].values():
            assert DiagonaliseRequest.parse(job.request.text()) == job.request


@pytest.mark.parametrize(
    ("found", "wrong"),
    [
        ('"count":30', '"count":null'),
        ('"tolerance":1e-09', '"tolerance":null'),
        ('"extent":"leading"', '"extent":"full"'),
        ('"extent":"leading"', '"extent":"auto"'),
        ('"solver":"auto"', '"solved":"auto"'),
    ],
)
def test_impossible_requests_are_refused(found: str, wrong: str) -> None:
    spectrum = SpectrumSettings("leading", 30, 1e-9, "auto")
    point = Point(EnsembleChoice("kleitman-rothschild", (), "fixed"), 500)
    text = DiagonaliseRequest(point, "causal", "symmetric", spectrum, 0, 1).text()
    assert found in text
    with pytest.raises(RequestError):
        DiagonaliseRequest.parse(text.replace(found, wrong))


def test_only_leading_spectra_of_many_elements_take_threads() -> None:
    sizes = [1000, MANY_ELEMENTS - 1, MANY_ELEMENTS]
    jobs = plan(sizes=sizes, spectrum={"extent": "leading", "count": 150}).all_jobs
    for job in jobs:
        request = job.request
        many = isinstance(request, DiagonaliseRequest) and request.point.size == MANY_ELEMENTS
        assert job.threads == (MANY_THREADS if many else 1)
    assert {job.request.point.size for job in jobs if isinstance(job.request, SprinkleRequest)} == set(sizes)


def test_forecasts_know_when_the_solver_changes() -> None:
    assert full.CROSSOVER == cost.TWO_STAGE_FROM
    assert get_args(Solver) == full.SOLVERS
    assert set(cost.LAPACK_SECONDS_AT_1000) == set(PARTS)


@pytest.mark.parametrize("matrix", ["causal", "link"])
@pytest.mark.parametrize("dimension", [2, 4])
def test_forecasts_rise_with_size_and_count(dimension: int, matrix: str) -> None:
    choice = EnsembleChoice("minkowski-diamond", (("dimension", dimension),), "fixed")
    operator = OperatorChoice(matrix, "symmetric")
    for function in (cost.diagonalise_seconds, cost.diagonalise_mib):
        by_size = [
            function(Point(choice, size), operator, SpectrumSettings("leading", 50, 1e-9, "auto"))
            for size in (1000, 5000, 20_000, 100_000, 1_000_000)
        ]
        assert by_size == sorted(by_size)
        by_count = [
            function(Point(choice, 100_000), operator, SpectrumSettings("leading", count, 1e-9, "auto"))
            for count in (1, 10, 100, 1000, 10_000)
        ]
        assert by_count == sorted(by_count)
