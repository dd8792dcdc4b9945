"""Orders of points of a spacetime, kept as coordinates: 8 d bytes an element instead of n/16."""

import hashlib
from collections.abc import Callable
from functools import cached_property

import numpy as np
from numpy.typing import ArrayLike

from conetone.errors import OrderError
from conetone.sprinkle.lightcone import Points
from conetone.sprinkle.order import Order
from conetone.sprinkle.relation import PackedRelation

# Coordinates below it have squares, and sums of them, that are finite.
LARGEST = 1e150


class Sprinkling(Order):
    """The order of points of a spacetime, shape (n, d), time first and sorted by it; element i is point i.

    `relate(positions, threads)` makes the packed relation, when it is first asked for. Raises OrderError
    for positions that are no finite numbers, or not sorted by time.
    """

    _positions: Points
    _relate: Callable[[Points, int], PackedRelation]

    def __init__(
        self, positions: ArrayLike, relate: Callable[[Points, int], PackedRelation], *, threads: int = 1
    ) -> None:
        object.__setattr__(self, "_positions", _validated(positions))
        object.__setattr__(self, "_relate", relate)
        object.__setattr__(self, "threads", threads)

    @cached_property
    def relation(self) -> PackedRelation:
        """The packed relation, about n²/16 bytes; made on first use."""
        return self._relate(self._positions, self.threads)

    @property
    def elements(self) -> int:
        """Number of elements n."""
        return len(self._positions)

    @property
    def positions(self) -> Points:
        """The points, shape (n, d), time first and sorted by it, read-only."""
        return self._positions

    @cached_property
    def positions_digest(self) -> str:
        """SHA-256 of the shape and the little-endian bytes of the positions, in hexadecimal."""
        n, d = self._positions.shape
        digest = hashlib.sha256(f"{n} points of {d} coordinates\n".encode())
        digest.update(self._positions.astype("<f8", copy=False).data)
        return digest.hexdigest()


def _validated(positions: ArrayLike) -> Points:
    """A read-only copy."""
    try:
        points = np.array(positions, dtype=np.float64, order="C")
    except (TypeError, ValueError) as error:
        raise OrderError("positions", str(error), "numbers") from None
    if points.ndim != 2 or points.shape[1] < 2:
        raise OrderError(
            "positions",
            f"an array of shape {points.shape}",
            "shape (n, d), d ≥ 2: a time and places for each element",
        )
    wrong = np.flatnonzero(~(np.abs(points) < LARGEST).all(axis=1))
    if wrong.size:
        row = int(wrong[0])
        raise OrderError(
            f"positions[{row}]",
            f"({', '.join(f'{x:g}' for x in points[row])})",
            f"finite numbers below {LARGEST:g} in size",
        )
    falls = np.flatnonzero(np.diff(points[:, 0]) < 0)
    if falls.size:
        row = int(falls[0]) + 1
        raise OrderError(
            f"positions[{row}]",
            f"time {float(points[row, 0])!r} after time {float(points[row - 1, 0])!r}",
            "times that do not fall",
            "sort the rows by their first column",
        )
    points.setflags(write=False)
    return points
