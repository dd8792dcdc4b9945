"""Sprinklings into regions of flat spacetime: uniform points, related where one can signal the other."""

import numpy as np
from numpy.typing import ArrayLike

from conetone.sprinkle.dominance import DominanceOrder
from conetone.sprinkle.lightcone import Points, relation_of_points
from conetone.sprinkle.order import Order
from conetone.sprinkle.sprinkling import Sprinkling


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


def order_of_points(points: Points, threads: int = 1) -> Sprinkling:
    """The causal order of points of flat spacetime, shape (n, d), time first, unit speed of light.

    Element i of the result is the i-th earliest point. i precedes j > i if (t_j − t_i)² ≥ |x_j − x_i|², for
    d = 2 if t_i − x_i ≤ t_j − x_j and t_i + x_i ≤ t_j + x_j. `threads` is the number of threads that find
    relation and links. Raises OrderError as Sprinkling does.
    """
    return order_of_positions(points[np.argsort(points[:, 0], kind="stable")], threads)


def order_of_positions(positions: ArrayLike, threads: int = 1) -> Sprinkling:
    """As `order_of_points`, of points that are sorted by time already; raises OrderError if they are not."""
    try:
        of_the_plane = np.shape(positions)[1:] == (2,)
    except ValueError:  # rows of unequal length, which Sprinkling refuses
        of_the_plane = False
    if of_the_plane:
        return DominanceOrder(positions, threads=threads)
    return Sprinkling(positions, relation_of_points, threads=threads)
