"""Sweep files: what valid ones resolve to, and what is said of every kind of fault."""

import re
import subprocess
import sys
import time
from dataclasses import replace
from itertools import product
from pathlib import Path
from typing import Any

import pytest
import yaml
from hypothesis import given, settings

from conetone.errors import SweepError
from conetone.fit.models import MODELS
from conetone.fit.size import WindowSettings
from conetone.fit.windows import Growth, WindowRule
from conetone.sweep.cost import full_mib
from conetone.sweep.definition import Sweep, load_sweep, resolve_sweep
from conetone.sweep.points import EnsembleChoice, OperatorChoice
from conetone.sweep.reading import LARGEST_FILE, read_yaml
from conetone.sweep.settings import ExtrapolationSettings, SpectrumSettings
from tests.sweep.corpus import (
    CLONE,
    INVALID,
    VALID,
    complete_sweep,
    damaged_sweeps,
    expectation,
    varied_sweeps,
)

CAUSAL_SYMMETRIC = OperatorChoice("causal", "symmetric")
CAUSAL_ANTISYMMETRIC = OperatorChoice("causal", "antisymmetric")
LINK_SYMMETRIC = OperatorChoice("link", "symmetric")
LINK_ANTISYMMETRIC = OperatorChoice("link", "antisymmetric")
LOW, MIDDLE = Growth(0.5, 0.33), Growth(0.7, 0.33)
HIGH, HIGHER = Growth(0.5, 0.5), Growth(0.7, 0.5)
DEFAULT_WINDOWS = WindowSettings(
    (WindowRule(LOW, HIGH), WindowRule(LOW, HIGHER), WindowRule(MIDDLE, HIGH), WindowRule(MIDDLE, HIGHER)),
    smallest_rank=2,
    bins=12,
    models=(),  # which theory names for each series
    estimator="smooth-count",
    weighting="diagonal",
)
FULL = SpectrumSettings("full", None, None, "auto")
DEFAULT_EXTRAPOLATION = ExtrapolationSettings((0.5, 0.75, 1.0), most_sizes_cut=2)


def diamond(dimension: int, count: Any = "fixed") -> EnsembleChoice:
    return EnsembleChoice("minkowski-diamond", (("dimension", dimension),), count)


def box(dimension: int, count: Any = "fixed") -> EnsembleChoice:
    return EnsembleChoice("minkowski-box", (("dimension", dimension),), count)


LAYERED = EnsembleChoice("kleitman-rothschild", (), "fixed")


def sweep(
    name: str,
    root_seed: int,
    choices: tuple[EnsembleChoice, ...],
    sizes: tuple[int, ...],
    replicates: tuple[int, ...],
    operators: tuple[OperatorChoice, ...],
    windows: WindowSettings = DEFAULT_WINDOWS,
    extrapolation: ExtrapolationSettings = DEFAULT_EXTRAPOLATION,
    spectrum: SpectrumSettings = FULL,
) -> Sweep:
    spectra = (spectrum,) * len(sizes)
    return Sweep(name, root_seed, choices, sizes, replicates, operators, spectra, windows, extrapolation)


MINIMAL = sweep("a", 0, (LAYERED,), (64, 96, 128), (2, 2, 2), (CAUSAL_SYMMETRIC,))
SINGLE = sweep(
    "single-values", 3, (box(4),), (512,), (10,), (LINK_ANTISYMMETRIC,),
    WindowSettings((WindowRule(Growth(1, 0.25), Growth(0.5, 0.75)),), 2, 12, ("power",)),
    ExtrapolationSettings((1.0,), 2),
)  # fmt: skip
# Written down from the meaning of the fields.
RESOLVED = {
    "contract-example": sweep(
        "first-look", 20261201,
        (diamond(2), diamond(3), diamond(4), diamond(5), box(2), LAYERED),
        (256, 362, 512, 724, 1024), (24, 24, 24, 24, 24), (CAUSAL_ANTISYMMETRIC, CAUSAL_SYMMETRIC),
    ),
    "minimal": MINIMAL,
    "any-order-of-fields": MINIMAL,
    "single-values-for-lists": SINGLE,
    "lists-of-one": SINGLE,
    "replicates-per-size": sweep(
        "replicates-per-size", 12, (diamond(2),), (128, 256, 512, 1024), (800, 200, 50, 12),
        (CAUSAL_ANTISYMMETRIC,),
    ),
    "poisson": sweep(
        "poisson", 77, (diamond(2, "poisson"), diamond(3, "poisson")), (64, 128, 256), (100, 100, 100),
        (CAUSAL_SYMMETRIC,),
    ),
    "link-matrix": sweep(
        "link-matrix", 5, (diamond(4),), (256, 512, 1024), (20, 20, 20), (LINK_SYMMETRIC, LINK_ANTISYMMETRIC)
    ),
    "every-operator": sweep(
        "every-operator", 5, (LAYERED,), (64, 128, 256), (20, 20, 20),
        (LINK_SYMMETRIC, CAUSAL_ANTISYMMETRIC, CAUSAL_SYMMETRIC, LINK_ANTISYMMETRIC),
    ),
    "every-dimension": sweep(
        "every-dimension", 8,
        (*(diamond(d) for d in (2, 3, 4, 5, 6, 7)), *(box(d) for d in (7, 6, 5, 4, 3, 2))),
        (256, 512, 1024), (8, 8, 8), (CAUSAL_ANTISYMMETRIC,),
    ),
    "one-ensemble-in-two-entries": sweep(
        "two-entries", 8, (diamond(2), diamond(4), diamond(3)), (256, 512, 1024), (8, 8, 8),
        (CAUSAL_ANTISYMMETRIC,),
    ),
    "everything-given": sweep(
        "everything-given", 2**63 - 1, (box(2, "poisson"), box(3, "poisson")), (300, 600, 1200), (30, 20, 10),
        (CAUSAL_SYMMETRIC, CAUSAL_ANTISYMMETRIC),
        WindowSettings(
            (
                WindowRule(Growth(2, 0.25), Growth(0.5, 0.8)),
                WindowRule(Growth(2, 0.25), Growth(0.125, 1)),
                WindowRule(Growth(1, 0.5), Growth(0.5, 0.8)),
                WindowRule(Growth(1, 0.5), Growth(0.125, 1)),
            ),
            3, 20, ("top-correction", "power"), "rank-bins", "correlated",
        ),
        ExtrapolationSettings((0.25, 0.5, 1.0, 2.0, 4.0), 0),
    ),
    "empty-mappings": sweep("empty-mappings", 1, (LAYERED,), (64, 96, 128), (2, 2, 2), (CAUSAL_SYMMETRIC,)),
    "windows-in-part": sweep(
        "windows-in-part", 1, (diamond(2),), (64, 96, 128), (2, 2, 2), (CAUSAL_ANTISYMMETRIC,),
        WindowSettings(
            (WindowRule(LOW, Growth(1, 0.75)), WindowRule(MIDDLE, Growth(1, 0.75))),
            2, 4, (),
        ),
    ),
    "block-style-with-comments": sweep(
        "block-style", 1000, (diamond(2), diamond(3)), (128, 256, 512), (40, 20, 10), (CAUSAL_ANTISYMMETRIC,)
    ),
    "quoted-texts": sweep(
        "2026-12-01", 1, (LAYERED,), (64, 96, 128), (2, 2, 2), (CAUSAL_SYMMETRIC,),
        WindowSettings((WindowRule(Growth(1, 0.25), Growth(1, 0.75)),), 2, 12, ()),
    ),
    "byte-order-mark-and-carriage-returns": sweep(
        "from-another-system", 0, (LAYERED,), (64, 96, 128), (2, 2, 2), (CAUSAL_SYMMETRIC,)
    ),
    "leading-spectra": sweep(
        "leading", 1, (diamond(2),), (512, 724, 1024), (4, 4, 4), (CAUSAL_ANTISYMMETRIC,),
        windows=replace(DEFAULT_WINDOWS, estimator="rank-bins"),
        spectrum=SpectrumSettings("leading", 22, 1e-9, "auto"),
    ),
    "leading-for-a-smooth-count": sweep(
        "leading-smooth", 1, (diamond(2),), (512, 724, 1024), (4, 4, 4), (CAUSAL_ANTISYMMETRIC,),
        spectrum=SpectrumSettings("leading", 68, 1e-9, "auto"),
    ),
    "leading-with-tolerance": sweep(
        "leading-tolerance", 1, (diamond(2),), (256, 512, 1024), (4, 4, 4), (CAUSAL_ANTISYMMETRIC,),
        spectrum=SpectrumSettings("leading", 100, 1e-10, "auto"),
    ),
    "full-by-lapack": sweep(
        "full-by-lapack", 1, (diamond(2),), (64, 128, 256), (4, 4, 4), (CAUSAL_ANTISYMMETRIC,),
        spectrum=SpectrumSettings("full", None, None, "lapack"),
    ),
    "every-model": sweep(
        "every-model", 1, (diamond(2),), (64, 128, 256), (4, 4, 4), (CAUSAL_ANTISYMMETRIC,),
        replace(DEFAULT_WINDOWS, models=tuple(MODELS)),
    ),
    "one-model-with-a-logarithm": sweep(
        "one-logarithm", 1, (diamond(2),), (64, 128, 256), (4, 4, 4), (OperatorChoice("causal", "singular"),),
        replace(DEFAULT_WINDOWS, models=("logarithm",)),
    ),
    "bins-of-rank-are-quoted": sweep(
        "bins-of-rank", 1, (diamond(2),), (64, 128, 256), (4, 4, 4), (CAUSAL_ANTISYMMETRIC,),
        replace(DEFAULT_WINDOWS, estimator="rank-bins"),
    ),
    "smooth-count-is-quoted": sweep(
        "smooth-count", 1, (diamond(2),), (64, 128, 256), (4, 4, 4), (CAUSAL_ANTISYMMETRIC,)
    ),
    "weights-with-correlations": sweep(
        "correlated", 1, (diamond(2),), (64, 128, 256), (4, 4, 4), (CAUSAL_ANTISYMMETRIC,),
        replace(DEFAULT_WINDOWS, weighting="correlated"),
    ),
    "one-size": sweep("one-size", 1, (diamond(2),), (1000,), (50,), (CAUSAL_ANTISYMMETRIC,)),
}  # fmt: skip


def fault_of(values: Any) -> SweepError:
    with pytest.raises(SweepError) as caught:
        resolve_sweep(values)
    return caught.value


def outcome(values: Any) -> Sweep | SweepError:
    try:
        return resolve_sweep(values)
    except SweepError as error:
        return error


def test_the_corpus_is_large_and_named_for_its_content() -> None:
    assert len(VALID) >= 14
    assert len(INVALID) >= 70
    assert all(
        re.fullmatch(r"[a-z0-9]+(-[a-z0-9]+)+|minimal|poisson|json", path.stem) for path in VALID + INVALID
    )


@pytest.mark.parametrize("path", VALID, ids=lambda path: path.stem)
def test_valid_files_resolve(path: Path) -> None:
    resolved = load_sweep(path)
    assert len(resolved.replicates) == len(resolved.sizes)
    # jobs receive the settings as JSON, window ends as text
    assert WindowSettings.from_json(resolved.windows.as_json()) == resolved.windows
    assert ExtrapolationSettings.from_json(resolved.extrapolation.as_json()) == resolved.extrapolation
    assert len(resolved.spectra) == len(resolved.sizes)
    assert all(SpectrumSettings.from_json(s.as_json()) == s and s.why for s in resolved.spectra)


@pytest.mark.parametrize("stem", RESOLVED)
def test_what_valid_files_resolve_to(stem: str) -> None:
    assert load_sweep(CLONE / f"tests/sweeps/valid/{stem}.yaml") == RESOLVED[stem]


def test_the_first_look_that_is_handed_out_resolves() -> None:
    assert load_sweep(CLONE / "config/first-look.yaml") == sweep(
        "first-look", 20261201, (diamond(2), diamond(3), diamond(4), diamond(5), LAYERED),
        (256, 362, 512, 724, 1024), (24, 24, 24, 24, 24), (CAUSAL_ANTISYMMETRIC, CAUSAL_SYMMETRIC),
    )  # fmt: skip


@pytest.mark.parametrize("path", INVALID, ids=lambda path: path.stem)
def test_invalid_files_are_refused_with_place_found_and_allowed(path: Path) -> None:
    with pytest.raises(SweepError) as caught:
        resolve_sweep(read_yaml(path))
    error, expected = caught.value, expectation(path)
    assert error.place == expected.place
    assert expected.found in error.found
    assert expected.allowed in error.allowed
    assert error.exit_code == 2
    assert str(error).isprintable()


@pytest.mark.parametrize(
    ("stem", "advice"),
    [
        ("unknown-field", "remove it"),
        ("unknown-field-typo", "did you mean replicates?; 1 more fault in the file"),
        ("unknown-parameter-typo", "did you mean dimension?; 1 more fault in the file"),
        ("unknown-field-of-windows-python-name", "did you mean from?"),
        ("unknown-field-of-extrapolation", "did you mean omegas?"),
        ("missing-sizes", "add this field"),
        ("file-empty-mapping", "add this field; 5 more faults in the file"),
        ("several-faults", "2 more faults in the file"),
        ("duplicate-field", "remove one"),
        ("ensemble-misspelt", "did you mean minkowski-diamond?"),
        ("part-misspelt-in-list", "did you mean antisymmetric?"),
        ("model-misspelt-in-list", "did you mean top-correction?"),
        ("model-of-the-logarithm-misspelt", "did you mean logarithm?"),
        ("models-null", "leave the field out for its default"),
        ("estimator-misspelt", "did you mean smooth-count?"),
        ("estimator-null", "leave the field out for its default"),
        ("weights-misspelt", "did you mean correlated?"),
        ("count-misspelt", "did you mean poisson?"),
        ("count-null", "leave the field out for its default"),
        ("windows-null", "leave the field out for its default"),
        ("name-null", ""),
        ("name-number", "quote it to make it a text"),
        ("name-capital", "write first-look"),
        ("name-accent", "write premiere"),
        ("name-path-traversal", "write elsewhere"),
        ("name-dot", ""),
        ("seed-quoted", "write 42"),
        ("seed-fraction", ""),
        ("sizes-exponent", "write 1000"),
        ("sizes-whole-with-point", "write 128"),
        ("omegas-read-as-text", "write 1.0e-3"),
        ("omegas-text", ""),
        ("full-with-leading-count", "remove it, or write extent: leading"),
        ("leading-with-solver", "remove it: solvers are for full spectra"),
        ("leading-without-count", "add this field, or write extent: auto"),
        ("leading-count-below-windows", "end the windows earlier, or ask for more"),
        (
            "leading-count-below-smooth-count",
            "end the windows earlier, or ask for more; windows.estimator: rank-bins takes 11",
        ),
        ("leading-count-null", "leave the field out for its default"),
        ("tolerance-read-as-text", "write 1.0e-9"),
        ("solver-misspelt", "did you mean two-stage?"),
        ("window-end-python-power", "write n^0.5"),
        ("window-end-no-spaces", "write 0.5 * n^0.5"),
        ("window-end-sum", ""),
        ("window-from-above-default-to", "windows.to has its default"),
        ("yaml-tab-indentation", "indent with spaces, not tabs"),
        ("yaml-missing-space-after-colon", "put a space after every colon"),
        ("yaml-wrong-indentation", "check the indentation"),
        ("file-several-documents", "remove the line ---"),
    ],
)
def test_advice(stem: str, advice: str) -> None:
    with pytest.raises(SweepError) as caught:
        resolve_sweep(read_yaml(CLONE / f"tests/sweeps/invalid/{stem}.yaml"))
    assert caught.value.advice == advice


@pytest.mark.parametrize("text", ["1e-3", "5E-1", "2e0", ".5e1", "1.e-2", "3.25e+0", "0.75", "1", "+1e-1"])
def test_the_number_that_is_advised_reads_as_the_number_that_was_meant(text: str) -> None:
    values = complete_sweep()
    values["extrapolation"]["omegas"] = text
    advised = fault_of(values).advice.removeprefix("write ")
    read = yaml.safe_load(advised)
    assert type(read) is float
    assert read == float(text)


def test_the_first_fault_in_the_file_is_told_first() -> None:
    values = {"extrapolation": {"omegas": 0}, **complete_sweep()}
    values["extrapolation"] = {"omegas": 0}
    values["sweep"] = "No"
    assert fault_of(values).place == "extrapolation.omegas"
    values["operators"][1]["part"] = "none"
    values["operators"][0]["matrix"] = "none"
    del values["extrapolation"], values["sweep"]
    error = fault_of(values)
    assert (error.place, error.advice) == ("operators[0].matrix", "2 more faults in the file")


def test_the_place_begins_with_the_file(tmp_path: Path) -> None:
    path = tmp_path / "study.yaml"
    for text, place in (
        ("sweep: Study\n", f"{path}: sweep"),
        ("sweep: [\n", f"{path}: line 2, column 1"),
        ("- 1\n", f"{path}"),
    ):
        path.write_text(text)
        with pytest.raises(SweepError) as caught:
            load_sweep(path)
        assert caught.value.place == place
        assert str(caught.value).startswith(f"{place}: found ")


@pytest.mark.parametrize("solver", ["auto", "two-stage", "lapack"])
@pytest.mark.parametrize("largest", [2, 150, 255, 1000, 1001, 20_000, 1_000_000])
def test_the_largest_size_is_the_one_that_fits_into_memory(
    monkeypatch: pytest.MonkeyPatch, largest: int, solver: str
) -> None:
    available = full_mib(largest, solver) + 1e-6
    monkeypatch.setattr("conetone.sweep.memory.memory_of_this_machine_mib", lambda: available)
    values = complete_sweep()
    values.update(sizes=[largest], replicates=3, spectrum={"solver": solver})
    values["ensembles"].pop()  # an order without positions cannot have a million elements
    del values["windows"]
    assert resolve_sweep(values).sizes == (largest,)
    values["sizes"] = [largest, largest + 1]
    error = fault_of(values)
    assert error.place == "sizes[1]"
    assert f"{largest + 1}, whose full spectrum needs" in error.found
    assert f"up to {largest} on this machine" in error.allowed
    assert error.advice == "spectrum.extent: leading needs less"


def test_an_order_that_is_too_large_is_not_helped_by_leading_spectra(monkeypatch: pytest.MonkeyPatch) -> None:
    values = complete_sweep()
    values["spectrum"] = {"extent": "full"}
    monkeypatch.setattr("conetone.sweep.memory.sprinkle_mib", lambda point: 1e9)
    error = fault_of(values)
    assert "whose order needs" in error.found
    assert error.advice == ""


def test_leading_spectra_fit_where_full_ones_do_not(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("conetone.sweep.memory.memory_of_this_machine_mib", lambda: 24 * 1024.0)
    values = complete_sweep()
    values.update(sizes=100_000, replicates=3)
    del values["windows"]
    values["ensembles"] = [{"ensemble": "minkowski-diamond", "dimension": [2, 4]}]
    values["spectrum"] = {"extent": "auto"}
    (spectrum,) = resolve_sweep(values).spectra
    assert (spectrum.extent, spectrum.tolerance) == ("leading", 1e-9)
    # 0.7 n^0.5 = 221.4, 3.3 times as many for the smooth count, in eights
    assert spectrum.count == 736
    values["windows"] = {"estimator": "rank-bins"}
    (spectrum,) = resolve_sweep(values).spectra
    # its end excluded, 1/16 more, in eights
    assert (spectrum.extent, spectrum.count) == ("leading", 240)
    values["spectrum"] = {"extent": "full"}
    assert "whose full spectrum needs 74" in fault_of(values).found
    # fewer than 80,096 elements: a full computation, of which the ends are kept
    values["spectrum"] = {"extent": "leading", "count": 10_000}
    values["sizes"] = 79_999
    assert "whose leading spectrum of 10000 eigenvalues of each sign needs 47" in fault_of(values).found


def test_auto_takes_the_quicker_one_that_the_windows_allow() -> None:
    values = complete_sweep()
    values.update(sizes=[64, 512, 2048, 8192], replicates=1)
    values["windows"] = {"to": "0.5 * n^0.5", "estimator": "rank-bins"}
    values["spectrum"] = {"extent": "auto", "solver": "two-stage", "tolerance": 1e-8}
    small, *_, large = resolve_sweep(values).spectra
    assert small == SpectrumSettings("full", None, None, "two-stage")
    assert large == SpectrumSettings("leading", 48, 1e-8, "auto")  # 45.3: 45 ranks, 47.8 with the margin
    values["windows"] = {"to": "0.5 * n^1", "estimator": "rank-bins"}
    *_, large = resolve_sweep(values).spectra
    assert large == SpectrumSettings("full", None, None, "two-stage")
    assert large.why == "4352 of each sign are too many: they take 34912 elements"
    values["windows"] = {"to": "0.5 * n^0.5", "estimator": "rank-bins"}
    values["spectrum"]["count"] = 44
    *_, large = resolve_sweep(values).spectra
    assert large.why == "the windows take 45 ranks, leading ones are 44"
    values["spectrum"]["count"] = 45
    *_, large = resolve_sweep(values).spectra
    assert large == SpectrumSettings("leading", 45, 1e-8, "auto")
    values["windows"] = {"to": "0.5 * n^0.5", "estimator": "smooth-count"}
    *_, large = resolve_sweep(values).spectra
    assert large.why == "the windows take 136 ranks, leading ones are 45"
    del values["spectrum"]["count"]
    *_, large = resolve_sweep(values).spectra
    assert large == SpectrumSettings("leading", 152, 1e-8, "auto")  # 3.3 times 45.3


def test_auto_does_not_depend_on_other_sizes_nor_on_this_machine(monkeypatch: pytest.MonkeyPatch) -> None:
    values = complete_sweep()
    values.update(sizes=[256, 1024, 4096], replicates=1, spectrum={"extent": "auto"})
    del values["windows"]
    before = resolve_sweep(values).spectra
    monkeypatch.setattr("conetone.sweep.memory.memory_of_this_machine_mib", lambda: 1e9)
    values["sizes"] = [128, 256, 1024, 2048, 4096, 8192]
    _, first, second, _, third, _ = resolve_sweep(values).spectra
    assert (first, second, third) == before


def test_a_leading_count_gives_at_least_the_ranks_of_the_widest_window() -> None:
    """In bins a window's end, exclusive, is at most one above the ranks; a smooth count takes three times."""
    values = complete_sweep()
    values["sizes"] = [100, 1000, 10_000]
    ends = ["0.6 * n^0.5", "0.3 * n^0.75", "0.01 * n^1"]
    last = max(Growth.parse(end).at(10_000) for end in ends)
    for count in [*range(280, 310), *range(880, 920)]:
        values["spectrum"] = {"extent": "leading", "count": count}
        for estimator, fits in (("rank-bins", last <= count + 1), ("smooth-count", 3 * last <= count)):
            values["windows"] = {"to": ends, "estimator": estimator}
            assert isinstance(outcome(values), Sweep) is fits


# What Snakemake may pass on from a file that it read itself, without our strict reading.
@pytest.mark.parametrize(
    ("values", "place", "found"),
    [
        (None, "the file", "nothing (null)"),
        ([], "the file", "an empty list"),
        ({1: 2}, "the file", "1 as the name of a field"),
        ({"sweep": "a", None: 2}, "the file", "nothing (null) as the name of a field"),
        ({**complete_sweep(), "windows": {True: 1}}, "windows", "true as the name of a field"),
        ({**complete_sweep(), "operators": [{(1, 2): 1}]}, "operators[0]", "a tuple as the name of a field"),
        ({**complete_sweep(), "\ud800": 1}, "the file", "'\\ud800' as the name of a field"),
        ({**complete_sweep(), "a b": 1}, "'a b'", "an unknown field"),
        ({**complete_sweep(), "root_seed": 10**5000}, "root_seed", "a number of more than 25 digits"),
        ({**complete_sweep(), "root_seed": -(10**25)}, "root_seed", "a number of more than 25 digits"),
        ({**complete_sweep(), "sizes": (64, 128, 256)}, "sizes", "a tuple"),
        ({**complete_sweep(), "extrapolation": {"omegas": 10**400}}, "extrapolation.omegas", "a number of"),
    ],
)  # fmt: skip
def test_values_that_no_strictly_read_file_has(values: Any, place: str, found: str) -> None:
    error = fault_of(values)
    assert error.place == place
    assert error.found.startswith(found)


@settings(max_examples=400, deadline=None)
@given(damaged_sweeps())
def test_a_damaged_sweep_resolves_or_is_refused_in_one_printable_line(values: dict[Any, Any]) -> None:
    resolved = outcome(values)
    if isinstance(resolved, SweepError):
        assert all((resolved.place, resolved.found, resolved.allowed))
        assert str(resolved).isprintable()
        assert len(str(resolved)) < 1000
        return
    assert all(isinstance(size, int) and size >= 2 for size in resolved.sizes)
    assert len(set(resolved.choices)) == len(resolved.choices) >= 1
    assert len(set(resolved.operators)) == len(resolved.operators) >= 1
    assert len(resolved.replicates) == len(resolved.sizes)


def as_list(value: Any) -> list[Any]:
    return value if isinstance(value, list) else [value]


@settings(max_examples=300, deadline=None)
@given(varied_sweeps())
def test_a_sweep_expands_into_every_combination_of_its_values(values: dict[str, Any]) -> None:
    choices = [
        EnsembleChoice(entry["ensemble"], parameters, values.get("count", "fixed"))
        for entry in values["ensembles"]
        for parameters in (
            [(("dimension", d),) for d in as_list(entry["dimension"])] if "dimension" in entry else [()]
        )
    ]
    operators = [
        OperatorChoice(entry["matrix"], part)
        for entry in values["operators"]
        for part in as_list(entry["part"])
    ]
    resolved = outcome(values)
    if isinstance(resolved, SweepError):
        repeated = len(set(choices)) < len(choices) or len(set(operators)) < len(operators)
        two_stage = values.get("spectrum", {}).get("solver") == "two-stage"
        singular = "singular" in {operator.part for operator in operators}
        place = "spectrum.solver" if two_stage and singular else "spectrum.count"
        assert repeated or resolved.place.startswith("windows.") or resolved.place == place
        return
    sizes = as_list(values["sizes"])
    assert resolved.choices == tuple(choices)
    assert resolved.operators == tuple(operators)
    assert resolved.sizes == tuple(sizes)
    given_replicates = values["replicates"]
    alike = [given_replicates] * len(sizes)
    assert resolved.replicates == tuple(given_replicates if isinstance(given_replicates, list) else alike)
    windows = values.get("windows", {})
    lows = [Growth.parse(text) for text in as_list(windows["from"])] if "from" in windows else [LOW, MIDDLE]
    highs = [Growth.parse(text) for text in as_list(windows["to"])] if "to" in windows else [HIGH, HIGHER]
    assert resolved.windows.rules == tuple(WindowRule(*ends) for ends in product(lows, highs))
    assert resolved.windows.models == tuple(as_list(windows.get("models", [])))
    assert resolved.windows.estimator == windows.get("estimator", "smooth-count")
    assert resolved.windows.weighting == windows.get("weights", "diagonal")
    spectrum = values.get("spectrum", {})
    extent = spectrum.get("extent", "full")
    assert {s.extent for s in resolved.spectra} <= ({"full", "leading"} if extent == "auto" else {extent})
    for size, found in zip(sizes, resolved.spectra, strict=True):
        if found.extent == "leading":
            assert found.count == spectrum.get("count", found.count)
            assert found.tolerance == spectrum.get("tolerance", 1e-9)
            last = max(high.at(size) for high in highs)
            bins = resolved.windows.estimator == "rank-bins"
            assert last - 1 <= found.count if bins else 3 * last <= found.count
        else:
            assert found.solver == spectrum.get("solver", "auto")
    assert resolved.extrapolation.omegas == tuple(
        as_list(values.get("extrapolation", {}).get("omegas", [0.5, 0.75, 1.0]))
    )


HEAD = "sweep: a\nroot_seed: 1\nreplicates: 2\noperators: [{matrix: causal, part: symmetric}]\n"
LAYERED_ENTRY = "ensembles: [{ensemble: kleitman-rothschild}]\n"
# Files as long as one may be, which a loop over all pairs of their entries would work at for long.
LONG_FILES = {
    "unknown-fields": HEAD + "".join(f"f{i}: 1\n" for i in range(10_000)),
    "entries-with-faults": HEAD + "sizes: 64\nensembles:\n" + "- {ensemble: x}\n" * 6_000,
    "sizes": HEAD + LAYERED_ENTRY + f"sizes: [{','.join(map(str, range(2, 17_000)))}, 2]\n",
    "repeated-values": HEAD + "sizes: 64\nensembles:\n"
    "- {ensemble: minkowski-box, dimension: [" + "2, " * 32_000 + "3]}\n",
    "omegas": HEAD + LAYERED_ENTRY + "sizes: 64\nextrapolation:\n  omegas: [" + "0.5, " * 19_000 + "1]\n",
    "windows": HEAD + LAYERED_ENTRY + "sizes: 64\nwindows:\n  from: [" + "n^0.25, " * 11_000 + "n^0.5]\n",
    "nested": "[" * LARGEST_FILE,
    "digits": "sweep: " + "9" * (LARGEST_FILE - 10),
}


@pytest.mark.parametrize("text", LONG_FILES.values(), ids=list(LONG_FILES))
def test_no_file_keeps_one_waiting(text: str, tmp_path: Path) -> None:
    path = tmp_path / "long.yaml"
    path.write_text(text)
    assert LARGEST_FILE * 0.7 < len(text) <= LARGEST_FILE
    begin = time.process_time()
    with pytest.raises(SweepError) as caught:
        load_sweep(path)
    # processor seconds; a few at most, where a loop over pairs of entries would take minutes
    assert time.process_time() - begin < 30
    assert len(str(caught.value)) < 1000 + len(str(path))


@pytest.mark.parametrize(
    ("command", "stem"),
    [
        ("expand", "yaml-unclosed-bracket"),
        ("expand", "unknown-field-with-line-break"),
        ("expand", "sizes-too-large-for-memory"),
        ("run", "several-faults"),
    ],
)
def test_the_command_line_refuses_in_one_line_and_writes_nothing(
    command: str, stem: str, tmp_path: Path
) -> None:
    path = CLONE / f"tests/sweeps/invalid/{stem}.yaml"
    ended = subprocess.run(
        [sys.executable, "-m", "conetone", command, str(path)], cwd=tmp_path, capture_output=True, text=True
    )
    assert ended.returncode == 2
    assert ended.stdout == ""
    assert ended.stderr.count("\n") == 1
    assert ended.stderr.startswith(f"conetone: {path}: {expectation(path).place}: found ")
    assert list(tmp_path.iterdir()) == []
