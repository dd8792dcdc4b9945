"""Figures drawn once for all tests of this folder."""

import pytest

from .drawing import Drawn, draw
from .tables import ANTISYMMETRIC, DIAMONDS, SYMMETRIC, failed, make_tables

LONG = "causal-set-of-an-ensemble-whose-name-goes-on-and-on"
UNBREAKABLE = "pseudoextraordinarilylongunbreakablename"


@pytest.fixture(scope="session")
def study(tmp_path_factory: pytest.TempPathFactory) -> Drawn:
    """An ordinary sweep: five ensembles, two operators."""
    ensembles = [*DIAMONDS, ("minkowski-box", 2), ("kleitman-rothschild", None)]
    operators = (ANTISYMMETRIC, SYMMETRIC)
    return draw(tmp_path_factory.mktemp("study"), make_tables(ensembles, operators), operators)


@pytest.fixture(scope="session")
def single(tmp_path_factory: pytest.TempPathFactory) -> Drawn:
    """One ensemble at one size, which nothing can be extrapolated from."""
    rows = failed(make_tables(DIAMONDS[:1], sizes=[256]), lambda row: True)
    return draw(tmp_path_factory.mktemp("single"), rows, (ANTISYMMETRIC,))


@pytest.fixture(scope="session")
def crowd(tmp_path_factory: pytest.TempPathFactory) -> Drawn:
    """Twelve ensembles with long names, with and without dimension; some series failed at the end, some early."""
    names = [
        (LONG, 2),
        (LONG, 3),
        (LONG, None),
        (UNBREAKABLE, 4),
        (UNBREAKABLE, None),
        ("a", None),
        ("$b$", None),
    ]
    ensembles = [*DIAMONDS, ("minkowski-box", 3), ("kleitman-rothschild", None), *names]
    rows = failed(make_tables(ensembles), lambda row: row["dimension"] == 3)
    rows = failed(rows, lambda row: row["ensemble"] == "a", also_spectra=True)
    return draw(tmp_path_factory.mktemp("crowd"), rows, (ANTISYMMETRIC,))


@pytest.fixture(scope="session")
def nothing(tmp_path_factory: pytest.TempPathFactory) -> Drawn:
    """Every series failed before it had a spectrum."""
    rows = failed(make_tables(DIAMONDS), lambda row: True, also_spectra=True)
    return draw(tmp_path_factory.mktemp("nothing"), rows, (ANTISYMMETRIC,))


@pytest.fixture(params=["study", "single", "crowd", "nothing"])
def any_drawn(request: pytest.FixtureRequest) -> Drawn:
    return request.getfixturevalue(request.param)
