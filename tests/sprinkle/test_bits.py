"""Bit-parallel kernels against plain matrix algebra, at every number of threads."""

from itertools import pairwise

import networkx as nx
import numpy as np
import pytest
from numba.core.sigutils import normalize_signature

from conetone.errors import OrderError
from conetone.kernels import compiled_signatures
from conetone.operators.dominance import DominanceProduct
from conetone.sprinkle import bits, lightcone
from conetone.sprinkle.groups import over_groups, ranges_of_groups
from conetone.sprinkle.minkowski import diamond_points, minkowski_diamond
from conetone.sprinkle.order import Order
from conetone.sprinkle.relation import PackedRelation, words_in_a_row

CASES = 200


def random_relation(seed, most_elements=200):
    """A transitive relation, sparse or dense, at times without pairs; and the same as 0 and 1."""
    generator = np.random.default_rng(seed)
    elements = int(generator.integers(0, most_elements + 1))
    density = generator.choice([0.0, 0.01, 0.05, 0.2, 1.0])
    matrix = np.triu(generator.random((elements, elements)) < density, 1)
    for k in range(elements):  # Warshall's closure
        matrix |= matrix[:, k, np.newaxis] & matrix[k]
    return PackedRelation.from_matrix(matrix), matrix.astype(float)


def test_links_are_pairs_with_nothing_between():
    for seed in range(CASES):
        relation, matrix = random_relation(seed)
        expected = (matrix == 1) & (matrix @ matrix == 0)
        links = bits.links_of(relation, threads=1 + seed % 3)
        np.testing.assert_array_equal(links.dense(np.bool_), expected)
        # no bit stands outside the matrix
        np.testing.assert_array_equal(links.words, PackedRelation.from_matrix(expected).words)


def test_links_are_those_of_networkx():
    for seed in range(100):
        relation, matrix = random_relation(seed, 70)
        graph = nx.DiGraph(np.argwhere(matrix).tolist())
        pairs = np.argwhere(bits.links_of(relation).dense(np.bool_)).tolist()
        assert {tuple(pair) for pair in pairs} == set(nx.transitive_reduction(graph).edges)


def test_height_is_the_index_of_the_nilpotent_matrix():
    for seed in range(CASES):
        relation, matrix = random_relation(seed, 130)
        power, height = np.eye(len(matrix), dtype=bool), 0
        while power.any():
            power, height = (power @ matrix) > 0, height + 1
        assert bits.height_of(relation) == height


def test_intervals():
    for seed in range(CASES):
        relation, matrix = random_relation(seed)
        between = (matrix @ matrix)[matrix == 1].astype(int)  # sorted by (i, j)
        sizes = bits.elements_between_of(relation)
        assert sizes.dtype == np.int32
        np.testing.assert_array_equal(sizes, between)
        for most in (0, 1, 4, len(matrix) + 3):
            expected = np.bincount(between, minlength=most + 1)[: most + 1]
            np.testing.assert_array_equal(bits.interval_counts_of(relation, most), expected)


def test_a_broken_triple_is_a_witness_and_there_is_one_exactly_if_any_exists():
    broken = 0
    for seed in range(CASES):
        generator = np.random.default_rng([seed, 1])
        relation, matrix = random_relation(seed, 150)
        assert bits.broken_triple_of(relation) is None
        pairs = np.argwhere(matrix)
        if not len(pairs):
            continue
        for i, j in generator.choice(pairs, min(3, len(pairs)), replace=False):
            matrix[i, j] = 0
        triple = bits.broken_triple_of(PackedRelation.from_matrix(matrix == 1))
        assert (triple is None) == (not ((matrix @ matrix > 0) & (matrix == 0)).any())
        if triple is not None:
            i, j, k = triple
            assert matrix[i, j]
            assert matrix[j, k]
            assert not matrix[i, k]
            broken += 1
    assert broken > 50


def test_orders_that_are_not_transitive_are_refused():
    matrix = np.zeros((70, 70), dtype=bool)
    matrix[3, 65] = matrix[65, 69] = True
    with pytest.raises(OrderError, match="3 before 65 and 65 before 69, but not 3 before 69") as caught:
        Order.from_matrix(matrix).require_transitive()
    assert caught.value.exit_code == 2
    matrix[3, 69] = True
    order = Order.from_matrix(matrix)
    assert order.require_transitive() is order


def test_antichains():
    for elements in (0, 1, 2, 63, 64, 65, 128, 200):
        order = Order.from_matrix(np.zeros((elements, elements), dtype=bool))
        assert order.links.pairs == 0
        assert order.height == min(elements, 1)
        assert order.is_transitive
        np.testing.assert_array_equal(order.interval_counts(2), [0, 0, 0])
        assert order.elements_between().shape == (0,)


@pytest.mark.parametrize("elements", [0, 1, 64, 65, 1000, 5003])
def test_ranges_cover_every_group_once_in_equal_shares(elements):
    groups = words_in_a_row(elements)
    for parts in (1, 2, 3, 16):
        ranges = ranges_of_groups(elements, parts)
        assert len(ranges) <= parts
        assert [group for first, last in ranges for group in range(first, last)] == list(range(groups))
        assert all(one[1] == other[0] for one, other in pairwise(ranges))
        shares = [sum(groups - group for group in range(first, last)) for first, last in ranges]
        if shares:
            assert max(shares) <= sum(shares) / parts + groups
        seen = []
        over_groups(elements, parts, lambda first, last, seen=seen: seen.extend(range(first, last)))
        assert sorted(seen) == list(range(groups))


def test_an_error_in_a_thread_is_raised():
    def fail(first, last):
        raise RuntimeError(f"{first} {last}")

    with pytest.raises(RuntimeError):
        over_groups(200, 2, fail)


def test_kernels_are_compiled_for_their_declared_signature_alone():
    # others are compiled again in every process, behind the back of the cache
    points = diamond_points(1, np.random.default_rng(0), 3)
    lightcone.relation_of_points(points)
    for elements in (1, 100):
        order = minkowski_diamond(elements, np.random.default_rng(1), dimension=2)
        assert order.links.pairs <= order.relations
        assert order.height > 0
        assert order.is_transitive
        order.interval_counts(1)
        order.elements_between()
        product = DominanceProduct(*order.light_cone)
        product.apply(np.ones((elements, 1)))
        product.apply(np.ones((1, elements)).T)
        product.apply(np.broadcast_to(1.0, (elements, 3)))
    used = {
        name: (declared, signatures)
        for place, (declared, signatures) in compiled_signatures().items()
        if (name := place.rpartition(".")[2]) in KERNELS
    }
    assert set(used) == KERNELS
    for name, (declared, signatures) in used.items():
        assert signatures == [normalize_signature(declared)[0]], name


KERNELS = {
    *("reduce_rows", "longest_chain", "breaks_transitivity", "measure_intervals"),
    *("relate_points", "relate_light_cones", "rising_pairs", "longest_rise", "split_segments", "multiply"),
}
