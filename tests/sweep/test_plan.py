"""Jobs: what a change of the spectrum asks for again, and how many threads a job takes."""

import json
from typing import Any, get_args

import numpy as np
import pytest

from conetone.diagonalise import full, leading
from conetone.errors import RequestError
from conetone.fit.models import LOGARITHM_MODELS, POWER_MODELS
from conetone.operators.catalogue import PARTS, SPECTRAL_PARTS
from conetone.records.tables import VERSIONS
from conetone.sweep import cost, fields
from conetone.sweep.definition import resolve_sweep
from conetone.sweep.plan import MANY_ELEMENTS, MANY_THREADS, STAGES, Plan
from conetone.sweep.points import EnsembleChoice, OperatorChoice, Point
from conetone.sweep.requests import DiagonaliseRequest, FitRequest, SprinkleRequest
from conetone.sweep.settings import Solver, SpectrumSettings


def plan(**changes: Any) -> Plan:
    values = {
        "sweep": "jobs",
        "root_seed": 1,
        "ensembles": [{"ensemble": "minkowski-diamond", "dimension": [2, 4]}],
        "sizes": [500, 1000, 2000],
        "replicates": 2,
        "operators": [{"matrix": "causal", "part": ["symmetric", "antisymmetric"]}],
        "windows": {"from": "0.2 * n^0.5", "to": "0.5 * n^0.5", "estimator": "rank-bins"},
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
        for job in plan(spectrum={"extent": each}).all_jobs:
            assert type(job.request).parse(job.request.text()) == job.request
    for other in ({"models": "knee"}, {"weights": "correlated"}, {"estimator": "smooth-count"}):
        for job in plan(windows=other).all_jobs:
            assert type(job.request).parse(job.request.text()) == job.request


def test_each_stage_has_a_version_of_its_own() -> None:
    for job in plan().all_jobs:
        text = job.request.text()
        assert json.loads(text)["version"] == VERSIONS[job.stage]
        with pytest.raises(RequestError, match=f"allowed: {job.stage} of version {VERSIONS[job.stage]}"):
            type(job.request).parse(text.replace(f'"version":{VERSIONS[job.stage]}', '"version":99'))


def test_another_version_of_fits_asks_for_no_spectrum_again(monkeypatch: pytest.MonkeyPatch) -> None:
    before = {stage: asked(plan(), stage) for stage in STAGES}
    monkeypatch.setitem(VERSIONS, "fit", VERSIONS["fit"] + 1)
    after = {stage: asked(plan(), stage) for stage in STAGES}
    assert {stage for stage in STAGES if before[stage] != after[stage]} == {"fit"}


@pytest.mark.parametrize(
    ("changes", "stages"),
    [
        ({"estimator": "smooth-count"}, {"fit", "aggregate"}),
        ({"weights": "correlated"}, {"fit"}),
        ({"models": ["power", "top-correction"]}, {"fit"}),
        ({"models": list(POWER_MODELS)}, set()),
    ],
)
def test_other_fits_ask_for_no_spectrum_again(changes: dict[str, Any], stages: set[str]) -> None:
    windows = {"from": "0.2 * n^0.5", "to": "0.5 * n^0.5", "estimator": "rank-bins"}
    operators = [{"matrix": "causal", "part": "antisymmetric"}]
    before, after = (plan(operators=operators, windows=each) for each in (windows, {**windows, **changes}))
    assert {stage for stage in STAGES if asked(before, stage) != asked(after, stage)} == stages


def test_every_series_has_the_models_that_theory_names_for_it() -> None:
    """Of C in the plane all parts but the antisymmetric one hold a logarithm (reference/plane.py)."""
    ensembles = [
        {"ensemble": "minkowski-diamond", "dimension": [2, 3]},
        {"ensemble": "minkowski-box", "dimension": 2},
        {"ensemble": "kleitman-rothschild"},
    ]
    operators = [{"matrix": matrix, "part": list(PARTS)} for matrix in ("causal", "link")]
    jobs = plan(ensembles=ensembles, operators=operators).jobs["fit"].values()
    assert len(jobs) == 4 * 2 * len(PARTS)
    for job in jobs:
        assert isinstance(job.request, FitRequest)
        series = job.request.series
        in_plane = dict(series.choice.parameters).get("dimension") == 2
        log = in_plane and series.operator.matrix == "causal" and series.operator.part != "antisymmetric"
        assert job.request.windows.models == (LOGARITHM_MODELS if log else POWER_MODELS), series.name
    for job in plan(ensembles=ensembles, windows={"models": "knee"}).jobs["fit"].values():
        assert isinstance(job.request, FitRequest)
        assert job.request.windows.models == ("knee",)


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
    assert {*cost.LAPACK_SECONDS_AT_1000, "singular"} == set(SPECTRAL_PARTS)


def test_parts_of_one_spectrum_are_diagonalised_once() -> None:
    """And the request is the one of `symmetric` alone, byte by byte, whatever stands beside it."""
    alone = plan(operators=[{"matrix": "causal", "part": "symmetric"}])
    every = plan(operators=[{"matrix": "causal", "part": ["symmetric-negative", "symmetric", "singular"]},
                            {"matrix": "causal", "part": ["symmetric-positive"]}])  # fmt: skip
    both = asked(every, "diagonalise")
    assert len(every.series) == 4 * len(alone.series)
    assert len(both) == 2 * len(asked(alone, "diagonalise"))
    assert {name: both[name] for name in asked(alone, "diagonalise")} == asked(alone, "diagonalise")
    signs = plan(operators=[{"matrix": "causal", "part": ["symmetric-negative", "symmetric-positive"]}])
    assert asked(signs, "diagonalise") == asked(alone, "diagonalise")
    inputs = {job.inputs for job in signs.jobs["fit"].values()}
    assert inputs == {job.inputs for job in alone.jobs["fit"].values()}
    assert signs.jobs["fit"].keys().isdisjoint(alone.jobs["fit"])


def test_requests_of_spectra_are_what_they_were() -> None:
    """Spectra of symmetric and antisymmetric parts that were computed before there were others stay good."""
    point = Point(EnsembleChoice("minkowski-diamond", (("dimension", 2),), "fixed"), 64)
    whole = SpectrumSettings("full", None, None, "auto")
    for part in ("symmetric", "antisymmetric"):
        assert DiagonaliseRequest(point, "causal", part, whole, 0, 4).text() == (
            f'{{"matrix":"causal","part":"{part}",'
            '"point":{"count":"fixed","ensemble":"minkowski-diamond","parameters":{"dimension":2},"size":64},'
            '"replicates":[0,4],'
            '"spectrum":{"count":null,"extent":"full","solver":"auto","tolerance":null},'
            '"stage":"diagonalise","version":2}'
        )


def test_no_spectrum_is_asked_of_a_part_that_shares_one() -> None:
    text = next(iter(asked(plan(), "diagonalise").values()))
    for part in ("symmetric-positive", "hermitian"):
        with pytest.raises(RequestError):
            DiagonaliseRequest.parse(text.replace('"part":"symmetric"', f'"part":"{part}"'))


def test_singular_values_are_forecast_as_a_matrix_twice_as_large() -> None:
    choice = EnsembleChoice("minkowski-diamond", (("dimension", 4),), "fixed")
    many = Point(choice, 100_000), SpectrumSettings("leading", 50, 1e-9, "auto")
    seconds, mib = (
        [function(many[0], OperatorChoice("causal", part), many[1]) for part in ("symmetric", "singular")]
        for function in (cost.diagonalise_seconds, cost.diagonalise_mib)
    )
    assert 1.8 < seconds[1] / seconds[0] < 2
    assert mib[1] - mib[0] == pytest.approx(8 * 100_000 * cost.basis_vectors(50) / 2**20)


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
