"""Figures drawn once for all tests of this folder."""

import pytest

from .drawing import Drawn, draw
from .tables import ANTISYMMETRIC, DIAMONDS, SYMMETRIC, failed, make_tables

LONG = "causal-set-of-an-ensemble-whose-name-goes-on-and-on"
# Slopes as at the steps of a spectrum, beyond what the axis shows.
STEEP = (7.0, -3.0, 2.5)
UNBREAKABLE = "pseudoextraordinarilylongunbreakablename"


@pytest.fixture(scope="session")
def study(tmp_path_factory: pytest.TempPathFactory) -> Drawn:
    """An ordinary sweep: four ensembles, two operators."""
    ensembles = [*DIAMONDS[:2], ("minkowski-box", 2), ("kleitman-rothschild", None)]
    operators = (ANTISYMMETRIC, SYMMETRIC)
    return draw(tmp_path_factory.mktemp("study"), make_tables(ensembles, operators), operators)


@pytest.fixture(scope="session")
def single(tmp_path_factory: pytest.TempPathFactory) -> Drawn:
    """One ensemble, fitted in bins of rank."""
    rows = make_tables(DIAMONDS[:1], estimator="rank-bins")
    return draw(tmp_path_factory.mktemp("single"), rows, (ANTISYMMETRIC,))


@pytest.fixture(scope="session")
def crowd(tmp_path_factory: pytest.TempPathFactory) -> Drawn:
    """Long names, with and without dimension; some series failed at the end, some early, one has one size."""
    rows = make_tables([*DIAMONDS[:2], (UNBREAKABLE, None), ("$b$", None)])
    one_size = make_tables([(LONG, 3)], sizes=[256])
    rows = {name: rows[name] + one_size[name] for name in rows}
    for i, slope in enumerate(STEEP):
        rows["profiles"][i]["slope"] = slope
    rows = failed(rows, lambda row: row["dimension"] == 3)
    rows = failed(rows, lambda row: row["ensemble"] == "$b$", also_spectra=True)
    return draw(tmp_path_factory.mktemp("crowd"), rows, (ANTISYMMETRIC,))


@pytest.fixture(scope="session")
def twelve(tmp_path_factory: pytest.TempPathFactory) -> Drawn:
    """As many ensembles as a sweep is likely to have, eight sizes, and all with long names."""
    names = [(f"{LONG}-{number}", dimension) for number in range(6) for dimension in (3, None)]
    sizes = [2**k for k in range(6, 14)]
    return draw(tmp_path_factory.mktemp("twelve"), make_tables(names, sizes=sizes), (ANTISYMMETRIC,))


@pytest.fixture(scope="session")
def nothing(tmp_path_factory: pytest.TempPathFactory) -> Drawn:
    """Every series failed before it had a spectrum."""
    rows = failed(make_tables(DIAMONDS[:2]), lambda row: True, also_spectra=True)
    return draw(tmp_path_factory.mktemp("nothing"), rows, (ANTISYMMETRIC,))


@pytest.fixture(
    params=["study", "single", "crowd", "nothing", pytest.param("twelve", marks=pytest.mark.slow)]
)
def any_drawn(request: pytest.FixtureRequest) -> Drawn:
    return request.getfixturevalue(request.param)
