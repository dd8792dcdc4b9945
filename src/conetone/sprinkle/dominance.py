"""Orders of dimension two, where light-cone coordinates make everything a question of permutations."""

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import ArrayLike, NDArray

from conetone.errors import OrderError
from conetone.kernels import kernel
from conetone.sprinkle.lightcone import Coordinates, Points, relation_of_light_cones
from conetone.sprinkle.relation import PackedRelation
from conetone.sprinkle.sprinkling import Sprinkling

Permutation = NDArray[np.int32]


@dataclass(frozen=True)
class LightConeRanks:
    """The order of points with light-cone coordinates u and v, as a permutation.

    `by_u`, shape (n,): the elements by rising u. `permutation`, shape (n,): their ranks in v. Of equal
    coordinates the lower label ranks lower, so that i precedes j exactly if both its ranks are lower.
    """

    by_u: NDArray[np.int64]
    permutation: Permutation

    @classmethod
    def of(cls, u: Coordinates, v: Coordinates) -> "LightConeRanks":
        """Ranks of coordinates in the sequence of labels, each of shape (n,)."""
        by_u = np.argsort(u, kind="stable")
        ranks = np.empty(len(v), dtype=np.int32)
        ranks[np.argsort(v, kind="stable")] = np.arange(len(v), dtype=np.int32)
        return cls(by_u, ranks[by_u])


class DominanceOrder(Sprinkling):
    """The order of points (t, x) of a conformally flat spacetime of two dimensions, sorted by time.

    i precedes j if i < j, u_i ≤ u_j and v_i ≤ v_j, with u = t − x and v = t + x. Relations and height take
    O(n log n) steps and no packed relation.
    """

    def __init__(self, positions: ArrayLike, *, threads: int = 1) -> None:
        super().__init__(positions, _relate, threads=threads)
        if self.positions.shape[1] != 2:
            raise OrderError("positions", f"{self.positions.shape[1]} coordinates", "two, t and x")

    @property
    def light_cone(self) -> tuple[Coordinates, Coordinates]:
        """The coordinates u = t − x and v = t + x, each of shape (n,)."""
        return _light_cone(self.positions)

    @cached_property
    def ranks(self) -> LightConeRanks:
        """The order as a permutation.

        Rounding cannot give an element both a lower u and a lower v than one of lower label: it keeps order
        or makes equal, and 2 t = u + v (derived here). So labels need not be compared any more.
        """
        return LightConeRanks.of(*self.light_cone)

    @cached_property
    def relations(self) -> int:
        """Number of related pairs: those of the permutation that are no inversions."""
        return int(rising_pairs(self.ranks.permutation.copy()))

    @cached_property
    def height(self) -> int:
        """Number of elements in the longest chain: the longest increasing subsequence."""
        return int(longest_rise(self.ranks.permutation))


def _light_cone(positions: Points) -> tuple[Coordinates, Coordinates]:
    times, places = positions.T
    return times - places, times + places


def _relate(positions: Points, threads: int) -> PackedRelation:
    return relation_of_light_cones(*_light_cone(positions), threads)


@kernel("int64(int32[::1])")
def rising_pairs(values: Permutation) -> int:
    """Number of pairs a < b with values[a] < values[b], all different, by merging; sorts its argument."""
    pairs = 0
    source, target = values, np.empty_like(values)
    size = 1
    while size < values.size:
        for start in range(0, values.size, 2 * size):
            middle = min(start + size, values.size)
            stop = min(start + 2 * size, values.size)
            low, high = start, middle
            for k in range(start, stop):
                if high == stop or (low < middle and source[low] < source[high]):
                    target[k] = source[low]
                    low += 1
                else:
                    target[k] = source[high]
                    high += 1
                    pairs += low - start
        source, target = target, source
        size *= 2
    return pairs


@kernel("int64(int32[::1])")
def longest_rise(values: Permutation) -> int:
    """Length of the longest increasing subsequence, by patience sorting (Aldous & Diaconis 1999)."""
    tops = np.empty_like(values)
    piles = 0
    for k in range(values.size):
        low, high = 0, piles
        while low < high:
            middle = (low + high) // 2
            if tops[middle] < values[k]:
                low = middle + 1
            else:
                high = middle
        tops[low] = values[k]
        piles = max(piles, low + 1)
    return piles
