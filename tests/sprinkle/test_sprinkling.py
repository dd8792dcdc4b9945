"""Orders of stored points: the same relation bit by bit, what is refused, what needs no relation."""

from bisect import bisect_left

import numpy as np
import pytest

from conetone.errors import OrderError
from conetone.sprinkle import sprinkling
from conetone.sprinkle.catalogue import ENSEMBLES, sprinkle
from conetone.sprinkle.dominance import DominanceOrder, LightConeRanks
from conetone.sprinkle.minkowski import diamond_points, order_of_points, order_of_positions
from conetone.sprinkle.order import Order
from conetone.sprinkle.relation import PackedRelation


def plain_relation(points):
    """NumPy, the whole matrix at once, of points sorted by time; light-cone coordinates in two dimensions."""
    if points.shape[1] == 2:
        u, v = points[:, 0] - points[:, 1], points[:, 0] + points[:, 1]
        return np.triu((u[:, np.newaxis] <= u) & (v[:, np.newaxis] <= v), 1)
    differences = points - points[:, np.newaxis]
    separation = differences[..., 0] ** 2
    for k in range(1, points.shape[1]):
        separation -= differences[..., k] ** 2
    return np.triu(separation >= 0, 1)


def random_points(seed):
    """Points of a diamond, of a box, or of a small lattice with many ties; sorted by time."""
    generator = np.random.default_rng(seed)
    elements, dimension = int(generator.integers(0, 301)), 2 + seed % 6
    kind = seed // 6 % 3
    if kind == 0:
        points = diamond_points(elements, generator, dimension)
    elif kind == 1:
        points = generator.normal(size=(elements, dimension)) * [3, *[1] * (dimension - 1)]
    else:
        points = generator.integers(0, generator.integers(1, 12), (elements, dimension)) / 8
    return points[np.argsort(points[:, 0], kind="stable")]


def test_relations_are_those_of_numpy_bit_by_bit():
    for seed in range(540):
        points = random_points(seed)
        relation = order_of_positions(points, threads=1 + seed % 2).relation
        expected = PackedRelation.from_matrix(plain_relation(points))
        np.testing.assert_array_equal(relation.words, expected.words, err_msg=str(seed))


@pytest.mark.parametrize("elements", [511, 512, 513, 1100])
@pytest.mark.parametrize("dimension", [2, 3, 5])
def test_relations_of_more_points_than_a_tile(dimension, elements):
    points = diamond_points(elements, np.random.default_rng(elements), dimension)
    order = order_of_points(points, threads=2)
    np.testing.assert_array_equal(order.relation.dense(np.bool_), plain_relation(order.positions))


def points_that_round_together(generator, elements):
    """Points whose light-cone coordinates are often equal where times and places are not."""
    points = 0.9 + generator.integers(0, 6, (elements, 2)) * 2.0**-53
    return points[np.argsort(points[:, 0], kind="stable")]


def test_two_dimensions_need_no_relation():
    ties = 0
    for seed in range(400):
        if seed % 2:
            points = points_that_round_together(np.random.default_rng(seed), seed % 90)
            ties += len(np.unique(points[:, 0] + points[:, 1])) < len(np.unique(points, axis=0))
        else:
            points = random_points(6 * (seed // 2))
        order = order_of_positions(points)
        assert type(order) is DominanceOrder
        stored = Order.from_matrix(plain_relation(points))
        assert order.relations == stored.relations
        assert order.height == stored.height
        assert order.relations == stored.relations  # what is cached is not what is sorted
        assert "relation" not in vars(order)
        assert order.is_transitive
        assert order.digest == stored.digest
        # one permutation says it all, labels included
        u_rank = np.argsort(order.ranks.by_u)
        v_rank = order.ranks.permutation[u_rank]
        both = (u_rank[:, np.newaxis] < u_rank) & (v_rank[:, np.newaxis] < v_rank)
        np.testing.assert_array_equal(both, plain_relation(points))
    assert ties > 100


def test_a_hundred_thousand_elements_of_two_dimensions():
    generator = np.random.default_rng(3)
    points = diamond_points(100_000, generator, 2)
    order = order_of_points(points)
    assert "relation" not in vars(order)
    tops = []
    for value in order.ranks.permutation.tolist():
        pile = bisect_left(tops, value)
        tops[pile : pile + 1] = [value]
    assert order.height == len(tops)
    # inversions of a random permutation: mean n(n − 1)/4, variance n(n − 1)(2n + 5)/72; the classical result
    n = order.elements
    assert abs(order.relations - n * (n - 1) / 4) < 5 * np.sqrt(n * (n - 1) * (2 * n + 5) / 72)


def test_ranks_of_equal_coordinates_follow_the_labels():
    ranks = LightConeRanks.of(np.array([1.0, 0, 1, 0]), np.array([2.0, 2, 2, 0]))
    assert ranks.by_u.tolist() == [1, 3, 0, 2]
    assert ranks.permutation.tolist() == [2, 0, 1, 3]


def test_every_ensemble_of_points_gives_its_orders_back():
    for name, ensemble in ENSEMBLES.items():
        parameters = {p.name: 3 for p in ensemble.parameters}
        order = sprinkle(name, parameters, 100, np.random.default_rng(1))
        if ensemble.from_positions is None:
            assert ensemble.region is None
            assert order.positions is None
            assert order.positions_digest is None
            continue
        assert order.positions.shape == (100, 3)
        assert not order.positions.flags.writeable
        again = ensemble.from_positions(order.positions, 2)
        assert again.positions_digest == order.positions_digest
        assert again.threads == 2
        assert again.digest == order.digest
        assert order.links.pairs == Order(order.relation).links.pairs


def test_the_digest_of_positions_changes_with_any_bit_and_with_the_shape():
    points = random_points(3)[:6, :2].copy()
    points = points[np.argsort(points[:, 0])]
    digests = {order_of_positions(points).positions_digest}
    assert digests == {order_of_positions(points.tolist()).positions_digest}
    for row in range(len(points)):
        changed = points.copy()
        changed[row, 1] = np.nextafter(changed[row, 1], np.inf)
        digests.add(order_of_positions(changed).positions_digest)
    assert len(digests) == len(points) + 1
    shapes = {order_of_positions(np.zeros(shape)).positions_digest for shape in [(6, 2), (4, 3), (3, 4)]}
    empty = {order_of_positions(np.zeros((0, d))).positions_digest for d in range(2, 6)}
    assert len(shapes | empty) == 7


@pytest.mark.parametrize("dimension", [2, 3])
def test_positions_are_checked_and_copied_once(dimension, monkeypatch):
    seen = []
    validated = sprinkling._validated
    monkeypatch.setattr(sprinkling, "_validated", lambda points: seen.append(points) or validated(points))
    points = np.zeros((3, dimension))
    order = order_of_positions(points, threads=2)
    assert (len(seen), order.threads) == (1, 2)
    assert seen[0] is points


def test_the_caller_keeps_his_array():
    points = np.zeros((3, 2))
    order = order_of_positions(points)
    points[0] = 7.0
    np.testing.assert_array_equal(order.positions, np.zeros((3, 2)))


@pytest.mark.parametrize("value", [np.nan, np.inf, -np.inf, 1e151])
@pytest.mark.parametrize("column", [0, 2])
def test_positions_that_are_no_finite_numbers_are_refused(value, column):
    points = np.zeros((5, 3))
    points[3, column] = value
    with pytest.raises(OrderError, match=r"positions\[3\]: found .*finite numbers below 1e\+150"):
        order_of_positions(points)


@pytest.mark.parametrize("points", [np.zeros(4), np.zeros((4, 1)), np.zeros((2, 2, 2)), 3.0, []])
def test_positions_of_another_shape_are_refused(points):
    with pytest.raises(OrderError, match=r"shape \(n, d\), d ≥ 2"):
        order_of_positions(points)


@pytest.mark.parametrize("points", [[["a", "b"]], [[1.0, 2.0], [1.0, 2.0, 3.0]], [[None, 1.0]], [[1j, 0]]])
def test_positions_that_are_no_numbers_are_refused(points):
    with pytest.raises(OrderError, match="positions"):
        order_of_positions(points)


def test_positions_that_are_not_sorted_by_time_are_refused():
    with pytest.raises(OrderError, match=r"positions\[2\]: found time 0\.5 after time 1\.0"):
        order_of_positions([[0.0, 0, 0], [1, 0, 0], [0.5, 0, 0]])
    assert order_of_positions([[0.0, 0, 0], [0, 1, 0]]).relations == 0
    with pytest.raises(OrderError, match="two, t and x"):
        DominanceOrder(np.zeros((2, 3)))


def test_a_null_pair_of_lattice_points_is_related():
    order = order_of_positions([[0.0, 0], [1, 1], [1, -1], [2, 0]])
    assert order.relation.dense(np.bool_).sum() == order.relations == 5
    assert order.height == 3
    assert repr(order) == "<DominanceOrder of 4 elements>"
