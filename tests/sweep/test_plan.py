"""Jobs: what a change of the spectrum asks for again, and how many threads a job takes."""

from typing import Any, get_args

import numpy as np
import pytest

from conetone.diagonalise import full, leading
from conetone.errors import RequestError
from conetone.operators.catalogue import PARTS
from conetone.sweep import cost, fields
from conetone.sweep.definition import resolve_sweep
from conetone.sweep.plan import MANY_ELEMENTS, MANY_THREADS, Plan
from conetone.sweep.points import EnsembleChoice, OperatorChoice, Point
from conetone.sweep.requests import DiagonaliseRequest, SprinkleRequest
from conetone.sweep.settings import Solver, SpectrumSettings


def plan(**changes: Any) -> Plan:
    values = {
        "sweep": "jobs",
        "root_seed": 1,
        "ensembles": [{"ensemble": "minkowski-diamond", "dimension": [2, 4]}],
        "sizes": [500, 1000, 2000],
        "replicates": 2,
        "operators": [{"matrix": "causal", "part": ["symmetric", "antisymmetric"]}],
        "windows": {"from": "0.2 * n^0.5", "to": "0.5 * n^0.5"},
    }
    return Plan(resolve_sweep({**values, **changes}))


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


def sizes_asked_again(before: Plan, after: Plan) -> set[int]:
    """The sizes of which any spectrum is asked for anew; of such a size, every one must be."""
    assert asked(before, "sprinkle") == asked(after, "sprinkle")
    spectra, others = asked(before, "diagonalise"), asked(after, "diagonalise")
    assert spectra.keys() == others.keys()
    changed = {name: text != others[name] for name, text in spectra.items()}
    by_size: dict[int, set[bool]] = {}
    for name, job in before.jobs["diagonalise"].items():
        assert isinstance(job.request, DiagonaliseRequest)
        by_size.setdefault(job.request.point.size, set()).add(changed[name])
    assert all(len(each) == 1 for each in by_size.values())
    return {size for size, each in by_size.items() if each == {True}}


def test_what_auto_decides_alike_is_not_asked_for_again() -> None:
    """500 elements are too few to gain anything; at 16,000 the windows take 63 ranks."""
    sizes = [500, 1000, 2000, 16_000]
    few = plan(sizes=sizes, spectrum={"extent": "auto", "count": 22})
    more = plan(sizes=sizes, spectrum={"extent": "auto", "count": 45})
    most = plan(sizes=sizes, spectrum={"extent": "auto", "count": 64})
    assert sizes_asked_again(few, more) == {1000, 2000}
    assert sizes_asked_again(more, most) == {1000, 2000, 16_000}
    assert sizes_asked_again(few, plan(sizes=sizes)) == {1000, 2000}
    assert sizes_asked_again(few, plan(sizes=sizes, spectrum={"extent": "auto", "count": 22})) == set()


def test_another_solver_asks_for_full_spectra_again_and_for_no_others() -> None:
    sizes = [500, 1000, 2000]
    for one, other in (("auto", "lapack"), ("auto", "two-stage"), ("two-stage", "lapack")):
        before, after = (plan(sizes=sizes, spectrum={"solver": solver}) for solver in (one, other))
        assert sizes_asked_again(before, after) == {500, 1000, 2000}
        before, after = (
            plan(sizes=sizes, spectrum={"extent": "auto", "count": 22, "solver": solver})
            for solver in (one, other)
        )
        assert sizes_asked_again(before, after) == {500}
    assert sizes_asked_again(plan(sizes=sizes), plan(sizes=sizes, spectrum={"solver": "auto"})) == set()


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


@pytest.mark.parametrize("count", [1, 22, 1000, fields.MOST_LEADING])
def test_forecasts_know_the_room_of_a_basis_and_tolerances_its_rounding(count: int) -> None:
    room = leading.BLOCK * (int(2 * count * leading.BASIS) // leading.BLOCK + leading.SPARE_BLOCKS)
    assert abs(cost.basis_vectors(count) - room) <= leading.BLOCK
    # what every bound contains, and as much again for a residual
    assert 2 * leading.SAFETY * room * np.finfo(np.float64).eps < fields.SMALLEST_TOLERANCE


def test_the_looks_at_the_convergence_are_in_the_forecast() -> None:
    """Of 1000 of each sign: 3248 vectors, six times 2e-9 · 3248³ s; 8 · n · 3248 and 100 · 3248² bytes."""
    choice = EnsembleChoice("minkowski-diamond", (("dimension", 2),), "fixed")
    settings = SpectrumSettings("leading", 1000, 1e-9, "auto")
    looks, products = 6 * 2e-9 * 3248**3, 7 * 1000 * 8.4e-9 * 2**20 * 20
    seconds = looks + products + 7e-9 * 2**20 * 1000**2 + 0.05
    mib = 150 + 400 + 8 * 3248 + 100 * 3248**2 / 2**20
    asked_for = Point(choice, 2**20), OperatorChoice("causal", "symmetric"), settings
    assert cost.diagonalise_seconds(*asked_for) == pytest.approx(seconds)
    assert cost.diagonalise_mib(*asked_for) == pytest.approx(mib)


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
