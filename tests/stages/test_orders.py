"""Orders in tables: packed or as positions, and back, the same order or an error."""

from pathlib import Path

import numpy as np
import pytest

from conetone.errors import TableError
from conetone.records.files import read_footer, read_rows, write_table
from conetone.records.tables import LARGEST_PACKED
from conetone.records.tables import ORDERS as TABLE
from conetone.sprinkle.catalogue import ENSEMBLES
from conetone.stages import orders as stored
from conetone.stages.orders import columns_of, order_of
from conetone.stages.sprinkle import draw, sprinkle_block
from conetone.sweep.points import EnsembleChoice, Point
from conetone.sweep.requests import SprinkleRequest

FILE = Path("orders/block.parquet")
LAYERED = EnsembleChoice("kleitman-rothschild", (), "fixed")
DIMENSIONS = (2, 3, 4)


def sprinkled(ensemble: str, dimension: int, size: int) -> Point:
    return Point(EnsembleChoice(ensemble, (("dimension", dimension),), "fixed"), size)


@pytest.fixture(autouse=True)
def _in_a_folder_of_its_own(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)


@pytest.fixture
def above_fifty(monkeypatch: pytest.MonkeyPatch) -> None:
    """Orders of more than fifty elements count as large."""
    monkeypatch.setattr(stored, "LARGEST_PACKED", 50)


@pytest.mark.parametrize("size", [50, 51, 90])
@pytest.mark.parametrize("dimension", DIMENSIONS)
@pytest.mark.parametrize("ensemble", ["minkowski-diamond", "minkowski-box"])
def test_an_order_comes_back_from_its_table(
    above_fifty: None, ensemble: str, dimension: int, size: int
) -> None:
    point = sprinkled(ensemble, dimension, size)
    sprinkle_block(SprinkleRequest(point, 1, 0, 3), FILE)
    for row in read_rows(FILE):
        order = draw(point, 1, row["replicate"])
        assert (row["positions"] is None) == (row["links"] is not None) == (size == 50)
        assert (row["packed_relation"] is None) == (size > 50)
        assert (row["relations"], row["height"]) == (order.relations, order.height)
        again = order_of(row, "here", threads=2)
        assert (again.digest, again.threads) == (order.digest, 2)
        assert (again.relations, again.height) == (order.relations, order.height)


def test_an_order_without_positions_is_packed_at_every_size(above_fifty: None) -> None:
    point = Point(LAYERED, 80)
    order = draw(point, 1, 0)
    columns = columns_of(order)
    assert (columns["positions"], columns["links"]) == (None, None)
    assert columns["digest"] == order.digest
    assert order_of({"ensemble": "kleitman-rothschild", **columns}, "here").digest == order.digest


@pytest.mark.parametrize("dimension", DIMENSIONS)
def test_positions_that_are_not_those_the_digest_names_are_refused(above_fifty: None, dimension: int) -> None:
    sprinkle_block(SprinkleRequest(sprinkled("minkowski-box", dimension, 60), 1, 0, 2), FILE)
    rows = read_rows(FILE)
    rows[1]["positions"][-1] += 1e-15  # another last bit
    write_table(FILE, TABLE, rows, request=read_footer(FILE)["request"])
    good, changed = read_rows(FILE)
    order_of(good, "here")
    with pytest.raises(TableError, match=r"^here: found digest .*; delete this file"):
        order_of(changed, "here")
    with pytest.raises(TableError, match="positions of kleitman-rothschild"):
        order_of({**good, "ensemble": "kleitman-rothschild"}, "here")


def test_a_large_order_of_the_plane_is_stored_without_ever_packing_it(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    """Its relations are the pairs that are no inversions, counted here by merging."""
    size = LARGEST_PACKED + 1
    order = draw(sprinkled("minkowski-box", 2, size), 3, 0)
    monkeypatch.setattr(type(order), "relation", property(lambda order: pytest.fail("the relation is made")))
    columns = columns_of(order)
    assert (columns["links"], columns["packed_relation"]) == (None, None)
    points = np.array(columns["positions"]).reshape(size, 2)
    u, v = points[:, 0] - points[:, 1], points[:, 0] + points[:, 1]
    _, inversions = _sorted_and_inversions(v[np.argsort(u, kind="stable")])
    assert columns["relations"] == size * (size - 1) // 2 - inversions
    assert order_of({"ensemble": "minkowski-box", **columns}, "here").positions_digest == columns["digest"]


def _sorted_and_inversions(values: np.ndarray) -> tuple[np.ndarray, int]:
    if len(values) < 2:
        return values, 0
    (left, in_left), (right, in_right) = (
        _sorted_and_inversions(half) for half in np.split(values, [len(values) // 2])
    )
    between = int((len(left) - np.searchsorted(left, right, side="right")).sum())
    return np.sort(values), in_left + in_right + between


def test_every_ensemble_of_points_is_rebuilt_from_points() -> None:
    for name, ensemble in ENSEMBLES.items():
        parameters = {parameter.name: parameter.minimum for parameter in ensemble.parameters}
        order = ensemble.sampler(20, np.random.default_rng(1), **parameters)
        assert (order.positions is None) == (ensemble.from_positions is None), name
