"""A run that asks for leading eigenvalues alone: the ends of full spectra, and exponents."""

import re

import numpy as np
import pandas as pd
import pytest

from conetone.diagonalise.full import full_spectrum
from conetone.operators.causal import causal_matrix
from conetone.sprinkle.order import Order
from conetone.sprinkle.relation import PackedRelation
from tests.workflow.conftest import Study

COUNT = 24


@pytest.fixture(scope="module")
def finished(tmp_path_factory: pytest.TempPathFactory) -> Study:
    study = Study(
        tmp_path_factory.mktemp("leading"),
        {
            "sweep": "ends",
            "root_seed": 7,
            "ensembles": [{"ensemble": "minkowski-diamond", "dimension": 2}],
            "sizes": [300, 548, 1000],
            "replicates": 4,
            "operators": [{"matrix": "causal", "part": "symmetric"}],
            "spectrum": {"extent": "leading", "count": COUNT},
            "windows": {
                "from": "0.25 * n^0.5",
                "to": ["0.12 * n^0.75", "0.14 * n^0.75"],
                "estimator": "rank-bins",
            },
        },
    )
    study.compute()
    return study


def test_eigenvalues_are_the_ends_of_full_spectra(finished: Study) -> None:
    orders = pd.read_parquet(finished.home / "orders").set_index("digest")
    spectra = pd.read_parquet(finished.home / "spectra")
    assert len(spectra) == 3 * 4
    assert set(spectra.status) == {"ok"}
    assert not spectra.solver.str.contains("two-stage|lapack|kept").any(), "no full spectrum in disguise"
    for row in spectra.itertuples():
        assert (row.extent, row.leading_count, row.tolerance) == ("leading", COUNT, 1e-9)
        relation = PackedRelation.from_bytes(row.elements, orders.packed_relation[row.digest])
        whole = full_spectrum(causal_matrix(Order(relation)), row.part, solver="lapack").eigenvalues
        ends = np.r_[whole[:COUNT], whole[-COUNT:]]
        norm = np.abs(whole).max()
        rounding = len(whole) * np.finfo(float).eps * norm
        assert (np.abs(row.eigenvalues - ends) <= row.residual_bound + rounding).all()
        assert (row.residual_bound <= 1e-9 * norm).all()


def test_they_end_in_exponents(finished: Study) -> None:
    exponents = pd.read_parquet(finished.home / "exponents.parquet")
    assert exponents.part.tolist() == ["symmetric"]
    assert (exponents.status == "ok").all()
    assert (exponents.replicates_used == 12).all()
    total = np.hypot(exponents.statistical, exponents.systematic)
    assert (abs(exponents.exponent - exponents.expected) < 5 * total).all()


def test_another_count_asks_for_the_spectra_again_and_for_no_order(finished: Study) -> None:
    study = Study(finished.folder, {**finished.fields})
    study.fields["spectrum"] = {"extent": "leading", "count": COUNT + 1}
    jobs = study.run("--", "-n", "--quiet", "rules").stdout
    counts = {stage: int(count) for stage, count in re.findall(r"^(\w+) +(\d+)$", jobs, re.MULTILINE)}
    assert counts["diagonalise"] == len(list((study.home / "spectra").glob("*.parquet")))
    assert counts["fit"] == 1
    assert "sprinkle" not in counts
