"""The sweep for publication, run whole (half an hour and more): exact laws, and errors as promised."""

import subprocess
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
import yaml

from tests.workflow.conftest import UP_TO_AGGREGATE, Study

SWEEP = Path(__file__).parents[2] / "config" / "flat-dimensions.yaml"
# What the total errors in d = 2, 3, 4, 5 must not exceed.
LARGEST_ERRORS = {2: 0.005, 3: 0.01, 4: 0.02, 5: 0.04}


@pytest.fixture(scope="module")
def tables(tmp_path_factory: pytest.TempPathFactory) -> dict[str, pd.DataFrame]:
    study = Study(tmp_path_factory.mktemp("flat-dimensions"), yaml.safe_load(SWEEP.read_text()))
    command = study.command("--quiet", *UP_TO_AGGREGATE)
    subprocess.run(command, env=study.environment, timeout=2 * 3600, check=True)
    return {name: pd.read_parquet(study.home / f"{name}.parquet") for name in ("exponents", "amplitudes")}


@pytest.mark.slow
def test_total_errors(tables: dict[str, pd.DataFrame]) -> None:
    exponents = tables["exponents"].set_index("dimension")
    assert max(exponents.sizes.loc[2]) >= 16_384
    for dimension, largest in LARGEST_ERRORS.items():
        row = exponents.loc[dimension]
        assert np.hypot(row.statistical, row.systematic) <= largest


@pytest.mark.slow
def test_the_exact_exponent(tables: dict[str, pd.DataFrame]) -> None:
    """1, from the Pauli–Jordan spectrum of the diamond (Johnston 2010; Afshordi et al. 2012)."""
    row = tables["exponents"].set_index("dimension").loc[2]
    assert row.expected_standing == "exact"
    assert abs(row.exponent - 1) < 3 * np.hypot(row.statistical, row.systematic)


@pytest.mark.slow
def test_the_exact_amplitudes(tables: dict[str, pd.DataFrame]) -> None:
    """Cut-offs at fixed smooth rank against the exact spectrum, 1/(2x), x = mπ or tan x = 2x (as above)."""
    exact = tables["amplitudes"].query("law_standing == 'exact'")
    assert len(exact) >= 6
    assert (exact.deviation.abs() < 4).all()
    assert (np.hypot(exact.statistical, exact.systematic) < 0.01 * exact.law).all()
