"""Both estimators side by side in the closing tables, and what follows from them: recomputed here plainly."""

from collections import Counter
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from conetone.aggregate.amplitudes import finite_size_coefficient
from conetone.records.files import read_rows
from conetone.stages.diagnostics import OMEGAS
from conetone.stages.fit import CUTOFF_RANKS

from .synthetic import SIZES, close, plan, power_law, table

PARTS = ["antisymmetric", "singular"]
BOTH = {"operators": [{"matrix": "causal", "part": PARTS}], "sizes": [*SIZES, 256]}
NUMBERS = ("exponent", "statistical", "systematic")


@pytest.fixture(autouse=True)
def _in_a_folder_of_its_own(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)


def spectrum(size: int, replicate: int) -> list[float]:
    """Of both signs for i(C − Cᵀ), of one for singular values: which is asked for does not matter here."""
    return [value for value in power_law(size, replicate) if value > 0]


def test_another_estimator_swaps_the_numbers_and_changes_none() -> None:
    found = {}
    for quoted in ("smooth-count", "rank-bins"):
        found[quoted] = close(plan(**BOTH, windows={"estimator": quoted}), spectrum)
        assert {row["estimator"] for row in found[quoted]} == {quoted}
        assert {row["estimator"] for row in table("bins")} == {quoted}
        fits = table("fits")
        by_estimator = Counter(fit["estimator"] for fit in fits if fit["window"] != "average")
        assert len(set(by_estimator.values())) == 1
        averages = [fit for fit in fits if fit["window"] == "average"]
        assert [fit["estimator"] for fit in averages] == [quoted] * 2 * 5
    for one, other in zip(*found.values(), strict=True):
        for name in NUMBERS:
            assert one[name] == other[f"other_{name}"]
            assert one[f"other_{name}"] == other[name]
        assert one["other_deviation"] == pytest.approx(-other["other_deviation"], rel=1e-12)
        assert (one["copies_size"], one["copies_replicate"]) == (
            other["copies_size"],
            other["copies_replicate"],
        )


def test_the_other_estimator_deviates_in_its_own_error() -> None:
    """Copies of both leave the same replicate out, so that what they share cancels in the difference."""
    runs = [
        close(plan(windows={"estimator": name}, sizes=BOTH["sizes"]))[0]
        for name in ("smooth-count", "rank-bins")
    ]
    quoted, other = (np.array(row["copies"]) for row in runs)
    sizes = np.array(runs[0]["copies_size"])
    difference = other - quoted
    variance = sum(
        (count - 1) / count * ((difference[sizes == size] - difference[sizes == size].mean()) ** 2).sum()
        for size, count in Counter(sizes.tolist()).items()
    )
    hidden = runs[0]["systematic"] ** 2 + runs[1]["systematic"] ** 2
    expected = (runs[1]["exponent"] - runs[0]["exponent"]) / np.sqrt(variance + hidden)
    assert runs[0]["other_deviation"] == pytest.approx(expected, rel=1e-9)


def test_bins_of_a_smooth_count_stand_at_the_ranks_they_reach() -> None:
    """Γ(1 + 1/2α) of the smooth rank: where a pure power law has λ = Λ (derived in fit/smoothcount.py)."""
    close(plan(), lambda size, replicate: power_law(size, replicate, noise=1e-4))
    rows = table("bins")
    assert rows
    for row in rows:
        assert row["first_rank"] == row["last_rank"]
        # Γ(1 + 2/3) for α = 3/4, from tables
        assert row["rank"] == pytest.approx(row["first_rank"] / 0.902745, rel=3e-3)
        law = np.log(row["size"] / 3) - 0.75 * np.log(row["rank"])
        assert row["log_magnitude"] == pytest.approx(law, abs=5e-3)


def test_bins_of_rank_hold_whole_ranks() -> None:
    close(plan(windows={"estimator": "rank-bins"}))
    for row in table("bins"):
        first, last = row["first_rank"], row["last_rank"]
        assert (first, last) == (int(first), int(last))
        assert first - 1e-9 <= row["rank"] <= last + 1e-9


def test_cutoffs_follow_their_law_and_come_with_copies() -> None:
    close(plan(sizes=[181, 256, 362]), lambda size, replicate: power_law(size, replicate, noise=1e-4))
    for job in plan(sizes=[181, 256, 362]).jobs["fit"].values():
        (path,) = [path for path in job.outputs if "cutoffs" in str(path)]
        rows = read_rows(path)
        assert rows
        for row in rows:
            assert row["smooth_rank"] in CUTOFF_RANKS
            law = -np.log(3) - 0.75 * np.log(row["smooth_rank"] / 0.902745)
            if row["smooth_rank"] < row["size"] / 2 / 4:
                assert row["log_cutoff"] == pytest.approx(law, abs=5e-3)
            assert np.mean(row["copies"]) == pytest.approx(row["log_cutoff"], abs=1e-12)
            assert row["copies_replicate"] == list(range(6))


def test_amplitudes_are_those_of_the_spectra_and_deviate_from_the_law_in_their_error() -> None:
    """Singular values of C in three dimensions have a law, 0.2111 r^−3/4; the spectra here 1/3 r^−3/4.

    Errors of the table are those of a logarithm times Λ/n.
    """
    close(plan(**BOTH), spectrum)
    rows = {part: [row for row in table("amplitudes") if row["part"] == part] for part in PARTS}
    assert rows["antisymmetric"]
    assert {row["law"] for row in rows["antisymmetric"]} == {None}
    for row in rows["singular"]:
        total = np.hypot(row["statistical"], row["systematic"])
        law = 0.2111 * (row["smooth_rank"] / 0.902745) ** -0.75
        assert row["law"] == pytest.approx(law, rel=5e-3)
        assert row["law_standing"] == "heuristic"
        assert row["deviation"] == pytest.approx(np.log(row["cutoff"] / row["law"]) * row["cutoff"] / total)
        # Γ(1 + 4/3)/Γ(1 + 2/3)²: cut-offs shift more than the eigenvalue of that rank (derived)
        assert row["slope_expected"] == pytest.approx(
            1.4609 * finite_size_coefficient(0.75) * row["smooth_rank"], rel=1e-4
        )
        # further down the smallest sizes are at their end
        if row["smooth_rank"] <= 8:
            assert abs(row["cutoff"] - law / 0.2111 / 3) < 5 * total + 5e-3 * law


def single(rows: list[dict[str, Any]], kind: str) -> dict[float, dict[str, Any]]:
    return {row["abscissa"]: row for row in rows if row["kind"] == kind}


def same(diagnostic: dict[str, Any], quoted: dict[str, Any]) -> None:
    """Quoted systematic errors hold a term more, for a logarithm unseen."""
    for name in NUMBERS[:2]:
        assert diagnostic[name] == pytest.approx(quoted[name], rel=1e-9)
    assert 0 < diagnostic["systematic"] <= quoted["systematic"] * (1 + 1e-9)


def test_diagnostics_are_what_other_settings_would_give() -> None:
    sizes = BOTH["sizes"]
    (usual,) = close(plan(sizes=sizes))
    rows = table("diagnostics")
    omegas, smallest = single(rows, "omega"), single(rows, "smallest-size")
    assert set(omegas) == set(OMEGAS)
    assert set(smallest) == set(sizes[:3])
    assert {row["kind"] for row in rows} == {"omega", "smallest-size", "collapse"}
    assert single(rows, "collapse")
    for row in single(rows, "collapse").values():
        assert [row[name] for name in NUMBERS] == [None] * 3
        assert row["quality"] > 0
    for omega in (0.5, 1.0):
        (alone,) = close(plan(sizes=sizes, extrapolation={"omegas": omega}))
        same(omegas[omega], alone)
        assert omegas[omega]["quality"] == alone["reduced_chi2"]
    for first in range(3):
        kept = {"sizes": sizes[first:], "extrapolation": {"most_sizes_cut": 0}}
        (alone,) = close(plan(**kept))
        same(smallest[sizes[first]], alone)
    assert usual["status"] == "ok"


def test_differences_know_that_series_share_their_orders() -> None:
    """Two parts of the same spectra: the difference of a series and itself would have no error at all."""
    rows = close(plan(**BOTH), spectrum)
    (found,) = table("differences")
    assert (found["series"], found["other_series"]) == tuple(row["series"] for row in rows)
    one, other = rows
    assert found["difference"] == one["exponent"] - other["exponent"] == 0.0, "the same numbers are ranked"
    assert found["statistical"] == pytest.approx(0, abs=1e-12)
    assert found["ratio"] == 1.0
    assert found["systematic"] == pytest.approx(np.hypot(one["systematic"], other["systematic"]))


def test_what_a_sweep_of_several_ensembles_compares() -> None:
    ensembles = [{"ensemble": "minkowski-diamond", "dimension": [2, 3]}, {"ensemble": "kleitman-rothschild"}]
    rows = close(plan(ensembles=ensembles), power_law)
    pairs = table("differences")
    assert len(pairs) == 3
    by_name = {row["series"]: row for row in rows}
    for pair in pairs:
        one, other = by_name[pair["series"]], by_name[pair["other_series"]]
        # different ensembles share no order: errors in quadrature
        total = np.hypot(one["statistical"], other["statistical"])
        assert pair["statistical"] == pytest.approx(total, rel=1e-9)
