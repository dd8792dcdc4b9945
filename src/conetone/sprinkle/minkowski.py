"""Sprinklings into regions of flat spacetime: uniform points, related where one can signal the other."""

from collections.abc import Iterator

import numpy as np
from numpy.typing import NDArray

from conetone.sprinkle.order import Order
from conetone.sprinkle.relation import WORD, Matrix, PackedRelation

Points = NDArray[np.float64]


def minkowski_diamond(elements: int, generator: np.random.Generator, *, dimension: int) -> Order:
    """Uniform sprinkling into the causal diamond |t| + r ≤ 1 of d-dimensional flat spacetime."""
    return order_of_points(diamond_points(elements, generator, dimension))


def minkowski_box(elements: int, generator: np.random.Generator, *, dimension: int) -> Order:
    """Uniform sprinkling into the unit hypercube, time along one edge (no identification of faces)."""
    return order_of_points(generator.random((elements, dimension)))


def diamond_points(elements: int, generator: np.random.Generator, dimension: int) -> Points:
    """Points uniform in |t| + r ≤ 1, shape (elements, dimension), time first.

    The distance h = 1 − |t| to the nearer tip has density ∝ h^(d−1); at height h, positions are uniform
    in the (d − 1)-ball of radius h.
    """
    to_the_tip = generator.random(elements) ** (1 / dimension)
    times = np.where(generator.random(elements) < 0.5, -1.0, 1.0) * (1 - to_the_tip)
    directions = generator.standard_normal((elements, dimension - 1))
    directions /= np.linalg.norm(directions, axis=1, keepdims=True)
    radii = to_the_tip * generator.random(elements) ** (1 / (dimension - 1))
    return np.column_stack([times, directions * radii[:, np.newaxis]])


def order_of_points(points: Points) -> Order:
    """The causal order of points of flat spacetime, shape (n, d), time first, unit speed of light.

    Element i of the result is the i-th earliest point. i precedes j if t_j − t_i ≥ |x_j − x_i|.
    """
    points = points[np.argsort(points[:, 0], kind="stable")]
    return Order(PackedRelation.from_row_groups(len(points), _row_groups(points)))


def _row_groups(points: Points) -> Iterator[Matrix]:
    columns = np.ascontiguousarray(points.T)
    labels = np.arange(len(points))
    for start in range(0, len(points), WORD):
        rows = slice(start, min(start + WORD, len(points)))
        separation = (columns[0] - columns[0, rows, np.newaxis]) ** 2
        for position in columns[1:]:
            separation -= (position - position[rows, np.newaxis]) ** 2
        # sorting by time made i < j the same as t_i ≤ t_j
        yield (separation >= 0) & (labels > labels[rows, np.newaxis])
