"""A run of every part of one matrix: series that share a spectrum share its jobs."""

import numpy as np
import pandas as pd
import pytest

from tests.workflow.conftest import Study

PARTS = ["symmetric", "symmetric-positive", "symmetric-negative", "singular"]


@pytest.fixture(scope="module")
def finished(tmp_path_factory: pytest.TempPathFactory) -> Study:
    study = Study(
        tmp_path_factory.mktemp("parts"),
        {
            "sweep": "parts",
            "root_seed": 9,
            "ensembles": [{"ensemble": "minkowski-diamond", "dimension": 2}],
            "sizes": 400,
            "replicates": 4,
            "operators": [{"matrix": "causal", "part": PARTS}],
        },
    )
    study.compute()
    return study


def test_four_series_come_from_two_spectra(finished: Study) -> None:
    spectra = pd.read_parquet(finished.home / "spectra")
    assert set(spectra.status) == {"ok"}
    assert sorted(spectra.part.unique()) == ["singular", "symmetric"]
    assert len(list((finished.home / "spectra").glob("*.parquet"))) == 2
    exponents = pd.read_parquet(finished.home / "exponents.parquet")
    assert sorted(exponents.part) == sorted(PARTS)
    assert set(exponents.replicates_used) == {4}
    assert set(exponents.expected) == {1.0}
    assert set(exponents.expected_standing) == {"exact"}


def test_their_leading_ranks_are_of_those_spectra(finished: Study) -> None:
    """The first bin of a profile is rank 1: the mean of its logs over the replicates."""
    spectra = pd.read_parquet(finished.home / "spectra")
    profiles = pd.read_parquet(finished.home / "profiles.parquet")
    first = profiles[profiles["rank"] == 1].set_index("part").log_magnitude
    symmetric = [row.eigenvalues for row in spectra[spectra.part == "symmetric"].itertuples()]
    singular = [row.eigenvalues for row in spectra[spectra.part == "singular"].itertuples()]
    largest = {
        "symmetric": [max(-values[0], values[-1]) for values in symmetric],
        "symmetric-positive": [values[-1] for values in symmetric],
        "symmetric-negative": [-values[0] for values in symmetric],
        "singular": [values[-1] for values in singular],
    }
    for part, values in largest.items():
        assert len(values) == 4
        assert first[part] == pytest.approx(np.log(values).mean(), rel=1e-12)
    assert all((values >= 0).all() for values in singular)
