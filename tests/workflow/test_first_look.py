"""The sweep that the README shows, run whole: what it promises about its exponents."""

from pathlib import Path

import numpy as np
import pandas as pd
import pytest
import yaml

from tests.workflow.conftest import Study

SWEEP = Path(__file__).parents[2] / "config" / "first-look.yaml"


@pytest.fixture(scope="module")
def exponents(tmp_path_factory: pytest.TempPathFactory) -> pd.DataFrame:
    study = Study(tmp_path_factory.mktemp("first-look"), yaml.safe_load(SWEEP.read_text()))
    study.compute()
    frame = pd.read_parquet(study.home / "exponents.parquet")
    return frame.assign(total=np.hypot(frame.statistical, frame.systematic))


@pytest.mark.slow
def test_it_covers_what_it_says(exponents: pd.DataFrame) -> None:
    diamonds = exponents[exponents.ensemble == "minkowski-diamond"]
    assert set(diamonds.dimension) == {2, 3, 4, 5}
    assert set(exponents.part) == {"antisymmetric", "symmetric"}
    assert (exponents.sizes.map(len) >= 5).all()
    assert (exponents.replicates_used == exponents.replicates_attempted).all()


@pytest.mark.slow
def test_the_exact_exponent_is_met(exponents: pd.DataFrame) -> None:
    """1, from the Pauli–Jordan spectrum of the diamond (Johnston 2010; Afshordi et al. 2012)."""
    exact = exponents[exponents.expected_standing == "exact"]
    (row,) = exact[exact.part == "antisymmetric"].itertuples()
    assert row.total < 0.02
    assert abs(row.exponent - 1) < 2 * row.total


@pytest.mark.slow
@pytest.mark.parametrize("part", ["antisymmetric", "symmetric"])
def test_exponents_order_by_dimension_and_the_kleitman_rothschild_order_stands_apart(
    exponents: pd.DataFrame, part: str
) -> None:
    of_part = exponents[exponents.part == part]
    diamonds = of_part[of_part.ensemble == "minkowski-diamond"].sort_values("dimension")
    value, total = diamonds.exponent.to_numpy(), diamonds.total.to_numpy()
    for near, far in zip(range(3), range(1, 4), strict=True):
        assert value[near] - value[far] > -np.hypot(total[near], total[far])
    (apart,) = of_part[of_part.ensemble == "kleitman-rothschild"].itertuples()
    assert ((value - apart.exponent) / np.hypot(total, apart.total) > 3).all()


@pytest.mark.slow
def test_the_heuristic_exponents_lie_within_three_errors(exponents: pd.DataFrame) -> None:
    """d/(2(d−1)), a heuristic expectation (derived here); a surprise would be news, and worth a look."""
    heuristic = exponents[exponents.expected_standing == "heuristic"]
    assert (heuristic.deviation.abs() < 3).all()
