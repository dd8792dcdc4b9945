"""Sprinklings into flat spacetime: marginals, light cones, relation counts."""

from itertools import combinations
from math import pi

import numpy as np
import pytest
from scipy import stats

from conetone.sprinkle.minkowski import diamond_points, minkowski_box, minkowski_diamond, order_of_points

SEEDS = (1, 2, 3)
DIMENSIONS = range(2, 8)
# Five standard errors of a normal variable, two-sided.
FIVE_SIGMA = 2 * stats.norm.sf(5)
POINTS = 20_000


def agrees(samples, cumulative):
    """Whether a Kolmogorov–Smirnov test finds nothing beyond five sigma."""
    return stats.kstest(samples, cumulative).pvalue > FIVE_SIGMA


@pytest.fixture(params=[(d, seed) for d in DIMENSIONS for seed in SEEDS], ids=str)
def sample(request):
    """Dimension, and points of a diamond."""
    dimension, seed = request.param
    return dimension, diamond_points(POINTS, np.random.default_rng([dimension, seed]), dimension)


# Densities of the uniform measure on |t| + r ≤ 1 in d dimensions; derived here by slicing.


def test_points_lie_inside_the_diamond(sample):
    dimension, points = sample
    assert points.shape == (POINTS, dimension)
    assert (np.abs(points[:, 0]) + np.linalg.norm(points[:, 1:], axis=1)).max() <= 1 + 1e-12


def test_smaller_diamonds_hold_their_share(sample):
    # |t| + r ≤ s is a smaller diamond: its share of the volume is s^d
    dimension, points = sample
    reach = np.abs(points[:, 0]) + np.linalg.norm(points[:, 1:], axis=1)
    assert agrees(reach, lambda s: np.clip(s, 0, 1) ** dimension)


def test_times(sample):
    # slices at time t are balls of radius 1 − |t|: density ∝ (1 − |t|)^(d − 1)
    dimension, points = sample
    assert agrees(
        points[:, 0],
        lambda t: np.where(
            t < 0, (1 - np.abs(t)) ** dimension / 2, 1 - np.clip(1 - np.abs(t), 0, None) ** dimension / 2
        ),
    )


def test_radii(sample):
    # density ∝ r^(d − 2) (1 − r)
    d, points = sample
    radii = np.linalg.norm(points[:, 1:], axis=1)
    assert agrees(radii, lambda r: d * r ** (d - 1) - (d - 1) * r**d)


def test_directions(sample):
    # the first coordinate of a uniform unit vector in k dimensions: (1 + u)/2 is beta((k − 1)/2, (k − 1)/2)
    dimension, points = sample
    if dimension == 2:
        right = (points[:, 1] > 0).sum()
        assert abs(right - POINTS / 2) < 5 * np.sqrt(POINTS) / 2
        return
    shape = (dimension - 2) / 2
    directions = points[:, 1:] / np.linalg.norm(points[:, 1:], axis=1, keepdims=True)
    for coordinate in directions.T:
        assert agrees((1 + coordinate) / 2, stats.beta(shape, shape).cdf)


@pytest.mark.parametrize("seed", SEEDS)
def test_light_cone_coordinates_in_two_dimensions_are_uniform_and_independent(seed):
    points = diamond_points(POINTS, np.random.default_rng(seed), 2)
    u, v = points[:, 0] - points[:, 1], points[:, 0] + points[:, 1]
    uniform = stats.uniform(-1, 2).cdf
    assert agrees(u, uniform)
    assert agrees(v, uniform)
    assert agrees(v[u < 0], uniform)
    assert abs(stats.kendalltau(u, v).statistic) < 5 * np.sqrt(4 / 9 / POINTS)


@pytest.mark.parametrize("seed", SEEDS)
@pytest.mark.parametrize("dimension", DIMENSIONS)
def test_density_of_the_box(dimension, seed, monkeypatch):
    seen = []
    monkeypatch.setattr("conetone.sprinkle.minkowski.order_of_points", seen.append)
    minkowski_box(POINTS, np.random.default_rng([dimension, seed]), dimension=dimension)
    (points,) = seen
    assert points.shape == (POINTS, dimension)
    for coordinate in points.T:
        assert agrees(coordinate, stats.uniform.cdf)
    for one, other in combinations(points.T, 2):
        assert abs(np.corrcoef(one, other)[0, 1]) < 5 / np.sqrt(POINTS)


def share_of_related_pairs_in_a_box(dimension, generator, pairs=400_000):
    """Plain Monte Carlo over independent pairs: share that is causally related, and its standard error."""
    separation = generator.random((pairs, dimension)) - generator.random((pairs, dimension))
    related = np.abs(separation[:, 0]) >= np.sqrt((separation[:, 1:] ** 2).sum(axis=1))
    return related.mean(), related.std() / np.sqrt(pairs)


@pytest.mark.parametrize("dimension", DIMENSIONS)
def test_relations_in_the_box(dimension):
    share, share_error = share_of_related_pairs_in_a_box(dimension, np.random.default_rng(dimension))
    # Closed forms, derived here: by symmetry in two dimensions; ∫ 2(1 − t) P(x² + y² ≤ t²) dt in three.
    closed = {2: 1 / 2, 3: pi / 6 - 7 / 30}
    if dimension in closed:
        assert abs(share - closed[dimension]) < 5 * share_error
    for seed in SEEDS:
        generator = np.random.default_rng([dimension, seed])
        fractions = [minkowski_box(100, generator, dimension=dimension).ordering_fraction for _ in range(150)]
        error = np.hypot(np.std(fractions, ddof=1) / np.sqrt(len(fractions)), share_error)
        assert abs(np.mean(fractions) - share) < 5 * error


def plain_order(points):
    """Relations by definition, pair by pair, of points sorted by time."""
    points = sorted(points.tolist(), key=lambda point: point[0])
    matrix = np.zeros((len(points), len(points)), dtype=bool)
    for i, j in combinations(range(len(points)), 2):
        earlier, later = points[i], points[j]
        square = sum((a - b) ** 2 for a, b in zip(earlier[1:], later[1:], strict=True))
        matrix[i, j] = later[0] - earlier[0] >= square**0.5
    return matrix


@pytest.mark.parametrize("elements", [0, 1, 2, 20, 63, 64, 65, 130])
@pytest.mark.parametrize("dimension", [2, 3, 4, 7])
def test_order_of_points(elements, dimension):
    for seed in SEEDS:
        generator = np.random.default_rng([elements, dimension, seed])
        for points in (
            generator.random((elements, dimension)),
            generator.normal(size=(elements, dimension)) * [3, *[1] * (dimension - 1)],
            diamond_points(elements, generator, dimension),
        ):
            order = order_of_points(points)
            np.testing.assert_array_equal(order.relation.dense(np.bool_), plain_order(points))
            assert order.is_transitive


def test_points_on_the_light_cone_are_related():
    # null separations that are exact in floating point: 1, and the triangle 3, 4, 5
    points = np.array([[0.0, 0, 0], [1, 1, 0], [5, 3, 4], [5, 3.5, 4]])
    expected = np.zeros((4, 4), dtype=bool)
    expected[0, 1] = expected[0, 2] = True  # everything else is spacelike
    np.testing.assert_array_equal(order_of_points(points).relation.dense(np.bool_), expected)


def test_the_order_does_not_depend_on_the_sequence_of_points():
    points = np.random.default_rng(5).random((100, 3))
    shuffled = np.random.default_rng(6).permutation(points)
    assert order_of_points(shuffled).digest == order_of_points(points).digest


@pytest.mark.parametrize("elements", [0, 1, 2])
@pytest.mark.parametrize("sampler", [minkowski_diamond, minkowski_box])
def test_the_smallest_sprinklings(sampler, elements):
    for seed in SEEDS:
        order = sampler(elements, np.random.default_rng(seed), dimension=4)
        assert order.elements == elements
        assert 0 <= order.relations <= elements * (elements - 1) // 2
