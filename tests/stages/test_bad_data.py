"""Spectra of which little or nothing is of use: rows with a status and a sentence, never a traceback."""

import re
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from conetone.records.tables import TABLES
from conetone.sweep.paths import CLOSING_TABLES

from .synthetic import SIZES, Spectrum, close, plan, power_law, table

pytestmark = pytest.mark.filterwarnings("error")


@pytest.fixture(autouse=True)
def _in_a_folder_of_its_own(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)


def check(rows: list[dict[str, Any]]) -> None:
    """A number is finite and ok, or null with a sentence; nothing else is null that must not be."""
    for row in rows:
        numbers = [row[name] for name in ("exponent", "statistical", "systematic")]
        if row["status"] == "ok":
            assert np.isfinite(numbers).all()
            assert row["reason"] is None
        else:
            assert numbers == [None, None, None]
            assert re.fullmatch(r".+ .+ .+", row["reason"])
    for name in CLOSING_TABLES:
        for row in table(name):
            assert set(row) == {column.name for column in TABLES[name].columns}
            reals = {key: value for key, value in row.items() if isinstance(value, float)}
            odd = {key for key, value in reals.items() if not np.isfinite(value)}
            assert odd <= ({"size"} if name == "extrapolations" else set()), (name, row)
    for fit in table("fits"):
        assert (fit["status"] == "ok") is (fit["reason"] is None) is (fit["exponent"] is not None)


def size_of_zeros(size: int, replicate: int) -> list[float]:
    return power_law(size, replicate) if size != 128 else [0.0] * size


def size_without_spectra(size: int, replicate: int) -> list[float] | None:
    return power_law(size, replicate) if size != 128 else None


def size_with_one(size: int, replicate: int) -> list[float] | None:
    return power_law(size, replicate) if size != 128 or replicate == 3 else None


def largest_without_spectra(size: int, replicate: int) -> list[float] | None:
    return power_law(size, replicate) if size != SIZES[-1] else None


def largest_with_few_ranks(size: int, replicate: int) -> list[float]:
    found = power_law(size, replicate)
    return found if size != SIZES[-1] else [*found[:3], *(-value for value in found[:3])]


def one_order_with_few_ranks(size: int, replicate: int) -> list[float]:
    found = power_law(size, replicate)
    return found if (size, replicate) != (90, 2) else [found[0], -found[0], *[0.0] * 88]


def empty_orders(size: int, replicate: int) -> list[float]:
    """As a Poisson number of elements may be none."""
    return power_law(size, replicate) if replicate else []


LEFT_OUT_128 = "sizes without a fit are left out: 128; the reasons stand in fits.parquet"


@pytest.mark.parametrize("estimator", ["smooth-count", "rank-bins"])
@pytest.mark.parametrize(
    ("spectrum", "sizes", "warning", "reasons"),
    [
        (size_of_zeros, [64, 90, 181], LEFT_OUT_128, {"0 usable of 6 replicates; an error bar takes two"}),
        (
            size_without_spectra,
            [64, 90, 181],
            "6 of 24 replicates failed: see status in spectra/",
            {"0 usable of 6 replicates; an error bar takes two"},
        ),
        (
            size_with_one,
            [64, 90, 181],
            "5 of 24 replicates failed: see status in spectra/",
            {"1 usable of 6 replicates; an error bar takes two"},
        ),
        (
            largest_without_spectra,
            [64, 90, 128],
            "sizes without a fit are left out: 181; the reasons stand in fits.parquet",
            {"0 usable of 6 replicates; an error bar takes two"},
        ),
        (
            largest_with_few_ranks,
            [64, 90, 128],
            "sizes without a fit are left out: 181; the reasons stand in fits.parquet",
            {"3 ranks with non-zero eigenvalues, fewer than any window takes"},
        ),
        (
            one_order_with_few_ranks,
            [64, 128, 181],
            "sizes without a fit are left out: 90; the reasons stand in fits.parquet",
            {"1 ranks with non-zero eigenvalues, fewer than any window takes"},
        ),
        (empty_orders, SIZES, None, set()),
    ],
)
def test_one_bad_size_leaves_the_others(
    spectrum: Spectrum, sizes: list[int], warning: str | None, reasons: set[str], estimator: str
) -> None:
    rows = close(plan(windows={"estimator": estimator}), spectrum)
    check(rows)
    (row,) = rows
    assert (row["status"], row["estimator"], row["sizes"]) == ("ok", estimator, sizes)
    assert warning is None or warning in row["warnings"]
    bad = set(SIZES) - set(sizes)
    assert {fit["reason"] for fit in table("fits") if fit["size"] in bad} == reasons
    total = np.hypot(row["statistical"], row["systematic"])
    assert abs(row["exponent"] - 0.75) < 5 * total


@pytest.mark.parametrize(
    ("changes", "reason"),
    [
        ({"replicates": 1}, "no size has a fit: see fits.parquet"),
        ({"sizes": 128}, "1 usable sizes; extrapolation takes 3"),
        ({"sizes": [128, 181]}, "2 usable sizes; extrapolation takes 3"),
        ({"sizes": [4, 5, 6]}, "no size has a fit: see fits.parquet"),
        ({"replicates": [1, 1, 4, 4]}, "2 usable sizes; extrapolation takes 3"),
    ],
)
def test_too_little_for_an_exponent(changes: dict[str, Any], reason: str) -> None:
    rows = close(plan(**changes))
    check(rows)
    (row,) = rows
    assert (row["status"], row["reason"]) == ("failed", reason)
    assert row["warnings"] or "sizes" in changes
    kinds = {found["kind"] for found in table("diagnostics")}
    assert kinds <= {"collapse"}, "no exponent to look into"
    assert table("differences") == table("extrapolations") == []


def test_nothing_at_all() -> None:
    rows = close(plan(), lambda size, replicate: None)
    check(rows)
    assert [row["reason"] for row in rows] == ["no size has a fit: see fits.parquet"]
    assert (rows[0]["replicates_used"], rows[0]["replicates_failed"]) == (0, 24)
    for name in set(CLOSING_TABLES) - {"fits", "exponents"}:
        assert table(name) == [], name


def test_a_window_with_fewer_ranks_than_a_fit_takes_bins() -> None:
    """At 64 elements, windows of 2 to 8 ranks make too few bins for two parameters and two to spare."""
    rows = close(plan(windows={"bins": 4, "estimator": "rank-bins"}))
    check(rows)
    reasons = {fit["reason"] for fit in table("fits") if (fit["size"], fit["estimator"]) == (64, "rank-bins")}
    assert reasons == {"3 bins of rank in the windows; a fit takes 4"}


def test_leading_spectra_too_short_for_the_smooth_count_say_so() -> None:
    """Asked for bins of rank, which they are enough for; the other estimator has no number then."""
    few = {"extent": "leading", "count": 18}
    windows = {"estimator": "rank-bins", "from": "0.25 * n^0.5", "to": "0.35 * n^0.75"}
    rows = close(
        plan(spectrum=few, windows=windows),
        lambda size, replicate: [v for v in power_law(size, replicate) if abs(v) >= size / 3 * 18.0**-0.75],
    )
    check(rows)
    (row,) = rows
    assert row["status"] == "ok"
    assert [row[f"other_{name}"] for name in ("exponent", "statistical", "deviation")] == [None] * 3
    reasons = {fit["reason"] for fit in table("fits") if fit["estimator"] == "smooth-count"}
    assert any("does not reach the windows" in str(reason) for reason in reasons)


@pytest.mark.parametrize("weights", ["diagonal", "correlated"])
def test_exactly_regular_spectra_have_no_error_to_speak_of(weights: str) -> None:
    rows = close(plan(windows={"weights": weights}), lambda size, replicate: power_law(size, 0, noise=0.0))
    check(rows)
    (row,) = rows
    # ends of spectra of 64 elements are seen by their smooth counts
    assert row["exponent"] == pytest.approx(0.75, abs=5e-3)
    assert row["statistical"] < 1e-6
    assert abs(row["exponent"] - 0.75) < row["systematic"]


KINDS = ("ok", "ok", "ok", "ok", "zeros", "few", "failed", "regular", "one", "empty", "positive")


def damaged(seed: int) -> Spectrum:
    def spectrum(size: int, replicate: int) -> list[float] | None:
        kind = np.random.default_rng([seed, size, replicate]).choice(KINDS)
        found = power_law(size, replicate, noise=0.0 if kind == "regular" else 0.02)
        half = len(found) // 2
        return {
            "zeros": [0.0] * size,
            "few": [*found[:3], *found[half : half + 3]],
            "failed": None,
            "one": found[:1],
            "empty": [],
            "positive": found[:half],
        }.get(str(kind), found)

    return spectrum


@pytest.mark.parametrize("seed", range(8))
def test_any_mixture_of_faults_ends_in_tables(seed: int) -> None:
    generator = np.random.default_rng(seed)
    count = int(generator.integers(1, 6))
    sizes = sorted(generator.choice([16, 32, 64, 91, 128, 181, 256], size=count, replace=False).tolist())
    parts = ["antisymmetric", "symmetric", "symmetric-positive", "symmetric-negative", "singular"]
    study = plan(
        ensembles=[{"ensemble": "minkowski-diamond", "dimension": int(generator.integers(2, 4))}],
        sizes=sizes,
        replicates=[int(number) for number in generator.integers(1, 9, size=count)],
        operators=[{"matrix": "causal", "part": generator.permutation(parts)[:2].tolist()}],
        windows={
            "estimator": ("rank-bins", "smooth-count")[seed % 2],
            "weights": ("diagonal", "correlated")[seed // 2 % 2],
        },
    )
    rows = close(study, damaged(seed))
    check(rows)
    assert len(rows) == 2
