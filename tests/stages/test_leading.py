"""Leading spectra in the stages: the ends of the full ones, and as good for a fit."""

from math import ceil
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from conetone.diagonalise.leading import LeadingSpectrum
from conetone.fit.logs import Estimator
from conetone.fit.size import WindowSettings
from conetone.fit.smoothcount import REACH
from conetone.fit.windows import Growth, WindowRule
from conetone.operators import catalogue
from conetone.operators.catalogue import OPERATORS, SPECTRAL_PARTS, SpectralPart
from conetone.records.files import read_rows
from conetone.stages import diagonalise, orders
from conetone.stages.diagonalise import diagonalise_block
from conetone.stages.fit import fit_series
from conetone.stages.sprinkle import sprinkle_block
from conetone.sweep.blocks import blocks_of
from conetone.sweep.paths import PIECE_TABLES, orders_path, piece_path, spectra_path
from conetone.sweep.points import EnsembleChoice, OperatorChoice, Point, Series
from conetone.sweep.requests import DiagonaliseRequest, FitRequest, SprinkleRequest
from conetone.sweep.settings import SpectrumSettings, smallest_for
from tests.orders import SELF_ADJOINT

DIAMOND = EnsembleChoice("minkowski-diamond", (("dimension", 2),), "fixed")
LAYERED = EnsembleChoice("kleitman-rothschild", (), "fixed")
POINT = Point(DIAMOND, 200)
ORDERS, SPECTRA = Path("orders/block.parquet"), Path("spectra/block.parquet")
FULL = SpectrumSettings("full", None, None, "auto")
COUNT = 12
Tables = dict[str, pd.DataFrame]


def ends(values: np.ndarray, part: SpectralPart, count: int) -> np.ndarray:
    if part == "singular":
        return values[-count:]
    return values if len(values) <= 2 * count else np.r_[values[:count], values[-count:]]


def leading(count: int = COUNT, tolerance: float = 1e-9) -> SpectrumSettings:
    return SpectrumSettings("leading", count, tolerance, "auto")


@pytest.fixture(autouse=True)
def _in_a_folder_of_its_own(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)


def spectra_of(
    spectrum: SpectrumSettings,
    part: SpectralPart,
    point: Point = POINT,
    matrix: str = "causal",
    threads: int = 1,
) -> list[dict]:
    sprinkle_block(SprinkleRequest(point, root_seed=1, first=0, stop=2), ORDERS)
    request = DiagonaliseRequest(point, matrix, part, spectrum, 0, 2)
    diagonalise_block(request, ORDERS, SPECTRA, threads=threads)
    return read_rows(SPECTRA)


@pytest.mark.parametrize("part", SPECTRAL_PARTS)
@pytest.mark.parametrize("matrix", OPERATORS)
@pytest.mark.parametrize("choice", [DIAMOND, LAYERED], ids=["diamond", "layered"])
def test_leading_eigenvalues_are_the_ends_within_their_bounds(
    choice: EnsembleChoice, matrix: str, part: SpectralPart
) -> None:
    point = Point(choice, 200)
    whole = spectra_of(FULL, part, point, matrix)
    for full, row in zip(whole, spectra_of(leading(), part, point, matrix), strict=True):
        assert (row["status"], row["extent"], row["leading_count"]) == ("ok", "leading", COUNT)
        assert row["tolerance"] == 1e-9
        found, bound = np.array(row["eigenvalues"]), np.array(row["residual_bound"])
        expected = np.array(full["eigenvalues"])
        norm = np.abs(expected).max()
        assert found.shape == bound.shape == ((1 if part == "singular" else 2) * COUNT,)
        assert (bound <= 1e-9 * norm).all()
        rounding = 200 * np.finfo(float).eps * norm
        assert (np.abs(found - ends(expected, part, COUNT)) <= bound + rounding).all()
        assert (row["sum_defect"], row["square_sum_defect"], row["pairing_defect"]) == (None, None, None)
        assert row["digest"] == full["digest"]
        assert (full["residual_bound"], full["leading_count"], full["tolerance"]) == (None, None, None)


@pytest.mark.parametrize("part", SPECTRAL_PARTS)
@pytest.mark.parametrize("dimension", [2, 3])
def test_orders_stored_as_positions_have_the_spectra_of_their_relations(
    dimension: int, part: SpectralPart, monkeypatch: pytest.MonkeyPatch
) -> None:
    """In the plane through counts of dominated points, else through the relation of the points."""
    point = Point(EnsembleChoice("minkowski-diamond", (("dimension", dimension),), "fixed"), 200)
    packed = spectra_of(leading(), part, point)
    multiplied = []
    for name in ("DominanceProduct", "PackedProduct"):
        product = getattr(catalogue, name)
        monkeypatch.setattr(
            catalogue, name, lambda *a, of=product, **k: multiplied.append(of.__name__) or of(*a, **k)
        )
    monkeypatch.setattr(orders, "LARGEST_PACKED", 100)
    monkeypatch.setattr(catalogue, "DOMINANCE_ABOVE", 100)
    for row, other in zip(packed, spectra_of(leading(), part, point), strict=True):
        assert row["digest"] != other["digest"], "one of bits, one of positions"
        norm = max(np.abs(row["eigenvalues"]))
        np.testing.assert_allclose(other["eigenvalues"], row["eigenvalues"], rtol=0, atol=2e-9 * norm)
    assert multiplied == ["DominanceProduct" if dimension == 2 else "PackedProduct"] * 2


@pytest.mark.parametrize("part", SPECTRAL_PARTS)
def test_threads_change_no_number(part: SpectralPart) -> None:
    one = spectra_of(leading(), part)
    for alone, shared in zip(one, spectra_of(leading(), part, threads=3), strict=True):
        assert alone["eigenvalues"] == shared["eigenvalues"]
        assert alone["residual_bound"] == shared["residual_bound"]


@pytest.mark.parametrize("part", SPECTRAL_PARTS)
@pytest.mark.parametrize("count", [14, POINT.size // 2, POINT.size])
def test_the_ends_of_a_small_matrix_come_from_a_full_computation(count: int, part: SpectralPart) -> None:
    full = spectra_of(FULL, part)
    for whole, row in zip(full, spectra_of(leading(count), part), strict=True):
        assert row["eigenvalues"] == ends(np.array(whole["eigenvalues"]), part, count).tolist()
        assert row["residual_bound"] is None
        assert row["solver"] == f"{whole['solver']}, ends kept"
        for defect in ("sum_defect", "square_sum_defect", "pairing_defect"):
            assert row[defect] == whole[defect], "sum rules audit it"


@pytest.mark.parametrize("part", SPECTRAL_PARTS)
def test_the_smallest_matrix_that_is_not_taken_whole(part: SpectralPart) -> None:
    for size, whole in ((smallest_for(5) - 1, True), (smallest_for(5), False)):
        for row in spectra_of(leading(5), part, Point(DIAMOND, size)):
            assert row["solver"].endswith("ends kept") is whole
            assert "dense" not in row["solver"]
            assert len(row["eigenvalues"]) == (5 if part == "singular" else 10)


def test_empty_and_tiny_orders_have_leading_spectra() -> None:
    tiny = Point(EnsembleChoice("minkowski-diamond", (("dimension", 2),), "poisson"), 2)
    sprinkle_block(SprinkleRequest(tiny, root_seed=1, first=0, stop=40), ORDERS)
    diagonalise_block(DiagonaliseRequest(tiny, "causal", "symmetric", leading(1), 0, 40), ORDERS, SPECTRA)
    drawn, spectra = pd.read_parquet(ORDERS), pd.read_parquet(SPECTRA)
    assert (spectra.status == "ok").all()
    assert [len(values) for values in spectra.eigenvalues] == drawn.elements.clip(upper=2).tolist()


def test_lapack_checks_the_other_solver() -> None:
    for part in SELF_ADJOINT:
        two_stage = SpectrumSettings("full", None, None, "two-stage")
        lapack = SpectrumSettings("full", None, None, "lapack")
        for ours, theirs in zip(spectra_of(two_stage, part), spectra_of(lapack, part), strict=True):
            assert ours["solver"] == "two-stage"
            assert theirs["solver"].startswith("lapack-")
            found, expected = np.array(ours["eigenvalues"]), np.array(theirs["eigenvalues"])
            np.testing.assert_allclose(found, expected, rtol=0, atol=1e-12 * expected.max())


def test_a_spectrum_that_did_not_converge_is_suspect_and_not_fitted(monkeypatch: pytest.MonkeyPatch) -> None:
    def unfinished(product, part, count, *, tolerance):
        values = np.array([-10.0, -5.0, 5.0, 10.0])
        bounds = np.array([1e-12, 2e-7, 3e-7, 1e-12])
        return LeadingSpectrum(values, bounds, False, 10.0, 7, "unfinished")

    monkeypatch.setattr(diagonalise, "leading_spectrum", unfinished)
    for row in spectra_of(leading(2), "antisymmetric"):
        assert row["status"] == "suspect"
        assert row["reason"] == (
            "2 of 4 eigenvalues above the tolerance 1.0e-09: largest bound 3.0e-08 of the norm"
        )
        assert row["eigenvalues"] == [-10.0, -5.0, 5.0, 10.0]
    (block,) = blocks_of(POINT, 2)
    series = Series(POINT.choice, OperatorChoice("causal", "antisymmetric"))
    path = spectra_path(block, series.operator)
    path.parent.mkdir(exist_ok=True)
    SPECTRA.replace(path)
    fit_series(FitRequest(series, (POINT.size,), (2,), windows()))
    for row in read_rows(piece_path(series.name, "fits")):
        assert (row["status"], row["replicates_failed"]) == ("failed", 2)
        assert row["reason"] == "0 usable of 2 replicates; an error bar takes two"


def windows(estimator: Estimator = "rank-bins") -> WindowSettings:
    rules = tuple(WindowRule(Growth(0.2, 0.5), Growth(last, 0.75)) for last in (0.18, 0.24))
    return WindowSettings(rules, 2, 8, ("power", "top-correction"), estimator)


def fitted(choice: EnsembleChoice, part: SpectralPart, count: int, estimator: Estimator) -> list[Tables]:
    """Tables of the fit stage from full spectra, then from leading ones, of 300 elements."""
    point, operator = Point(choice, 300), OperatorChoice("causal", part)
    series = Series(choice, operator)
    (block,) = blocks_of(point, 4)
    sprinkle_block(SprinkleRequest(point, 1, 0, 4), orders_path(block))
    found = []
    for spectrum in (FULL, leading(count)):
        request = DiagonaliseRequest(point, "causal", part, spectrum, 0, 4)
        diagonalise_block(request, orders_path(block), spectra_path(block, operator))
        fit_series(FitRequest(series, (300,), (4,), windows(estimator)))
        found.append({name: pd.read_parquet(piece_path(series.name, name)) for name in PIECE_TABLES})
    return found


@pytest.mark.parametrize("part", SPECTRAL_PARTS)
@pytest.mark.parametrize("choice", [DIAMOND, LAYERED], ids=["diamond", "layered"])
def test_fits_and_profiles_are_those_of_full_spectra(choice: EnsembleChoice, part: SpectralPart) -> None:
    """The widest window at n = 300 ends at rank 17.3; profiles go as far as ranks are complete."""
    count = 17
    full, kept = fitted(choice, part, count, "rank-bins")
    for tables in (full, kept):
        tables["fits"] = tables["fits"].query("estimator == 'rank-bins'")
    assert (full["fits"].status == "ok").any()
    for name in ("fits", "bins"):
        near = {"check_exact": False, "check_dtype": False, "rtol": 1e-5, "atol": 1e-8}
        pd.testing.assert_frame_equal(kept[name], full[name], **near)
    assert count <= kept["profiles"]["rank"].max() + 1 <= 2 * count + 1
    # the first rank is a bin of its own
    first = [frame["profiles"].log_magnitude[0] for frame in (kept, full)]
    assert first[0] == pytest.approx(first[1], rel=1e-8)


@pytest.mark.parametrize("part", SPECTRAL_PARTS)
def test_smooth_counts_of_leading_spectra_are_those_of_full_ones(part: SpectralPart) -> None:
    """What lies beyond the leading ones, 1 % of the count at its end, is completed by their power law."""
    full, kept = fitted(DIAMOND, part, ceil(REACH * 17.3), "smooth-count")
    fits = [tables["fits"].query("estimator == 'smooth-count' and status == 'ok'") for tables in (kept, full)]
    assert len(fits[0]) == len(fits[1]) == 4
    assert (fits[0].exponent - fits[1].exponent).abs().max() < 3e-4
    assert (kept["bins"].log_magnitude - full["bins"].log_magnitude).abs().max() < 2e-4
    shared = kept["cutoffs"].merge(full["cutoffs"], on="smooth_rank")
    assert (shared.log_cutoff_x - shared.log_cutoff_y).abs().max() < 1e-3
    assert len(shared) == len(kept["cutoffs"]) < len(full["cutoffs"])
