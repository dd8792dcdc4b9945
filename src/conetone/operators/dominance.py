"""The causal matrix of an order of dimension two times a block of vectors, without the matrix."""

from concurrent.futures import ThreadPoolExecutor

import numpy as np
from numpy.typing import NDArray

from conetone.kernels import inner, kernel
from conetone.sprinkle.dominance import LightConeRanks
from conetone.sprinkle.lightcone import Coordinates

Block = NDArray[np.float64]

# Columns taken through the recursion together; more would only make copies larger.
COLUMNS = 16


class DominanceProduct:
    """Products with the causal matrix C of n points given by light-cone coordinates u and v.

    C[i, j] = 1 if u_i ≤ u_j and v_i ≤ v_j, for equal coordinates only if i < j. For labels sorted by time
    t = (u + v)/2 that is the causal order. Divide and conquer over u: between two halves, one pass in the
    sequence of v adds up what one half gives the other. O(n log n) steps a column; keeps about
    4 n log₂ n bytes.

    Attributes: `elements`, n; `threads`, of which two are of use. Raises ValueError for coordinates that are
    no two arrays of shape (n,) of finite numbers.
    """

    def __init__(self, u: Coordinates, v: Coordinates, *, threads: int = 1) -> None:
        if u.ndim != 1 or u.shape != v.shape or not (np.isfinite(u).all() and np.isfinite(v).all()):
            raise ValueError("light-cone coordinates must be two arrays of shape (n,) of finite numbers")
        self.elements = len(u)
        self.threads = threads
        ranks = LightConeRanks.of(u, v)
        self._by_u = ranks.by_u
        levels = max(self.elements - 1, 0).bit_length()
        # row k: the places in u of each segment of 2^(k + 1) elements, by rising v
        self._sorted = np.empty((levels, self.elements), dtype=np.int32)
        if levels:
            self._sorted[-1, ranks.permutation] = np.arange(self.elements, dtype=np.int32)
            split_segments(self._sorted)

    def apply(self, block: Block) -> tuple[Block, Block]:
        """C X and Cᵀ X of a block X, all float64 of shape (n, p) in C order.

        Sums are taken in the same sequence whatever the number of threads. Raises ValueError for another
        shape.
        """
        if block.ndim != 2 or len(block) != self.elements:
            raise ValueError(f"a block of shape {block.shape} for {self.elements} elements")
        # one type for the kernel, whether or not the caller's array may be written
        given = np.ascontiguousarray(block, dtype=np.float64).view()
        given.setflags(write=False)
        if self.threads == 1:
            return self._product(given, False), self._product(given, True)
        with ThreadPoolExecutor(2) as pool:
            future, past = (pool.submit(self._product, given, transposed) for transposed in (False, True))
            return future.result(), past.result()

    def _product(self, block: Block, transposed: bool) -> Block:
        result = np.empty(block.shape)
        for first in range(0, block.shape[1], COLUMNS):
            multiply(self._by_u, self._sorted, block, first, COLUMNS, transposed, result)
        return result


@kernel("void(int32[:, ::1])")
def split_segments(ordered: NDArray[np.int32]) -> None:
    """From the last row up: halve the segments of a row, each half keeping its sequence."""
    levels, elements = ordered.shape
    for level in range(levels - 1, 0, -1):
        size = 2 << level
        for start in range(0, elements, size):
            middle = min(start + size // 2, elements)
            low, high = start, middle
            for k in range(start, min(start + size, elements)):
                e = ordered[level, k]
                if e < middle:
                    ordered[level - 1, low] = e
                    low += 1
                else:
                    ordered[level - 1, high] = e
                    high += 1


@inner
def _add_row(total: Block, rows: Block, row: int) -> None:
    for c in range(total.size):
        total[c] += rows[row, c]


@inner
def _add_to_row(rows: Block, row: int, total: Block) -> None:
    for c in range(total.size):
        rows[row, c] += total[c]


@kernel(
    "void(int64[::1], int32[:, ::1], Array(float64, 2, 'C', readonly=True), int64, int64, boolean, "
    "float64[:, ::1])"
)
def multiply(
    by_u: NDArray[np.int64],
    ordered: NDArray[np.int32],
    block: Block,
    first: int,
    columns: int,
    transposed: bool,
    result: Block,
) -> None:
    """Write C X, or Cᵀ X, of some columns of X.

    A segment is finished as soon as both its halves are, while their rows are still in the cache.
    """
    elements = by_u.size
    width = min(columns, block.shape[1] - first)
    given, taken = np.empty((elements, width)), np.empty((elements, width))
    for s in range(elements):
        for c in range(width):
            given[s, c] = block[by_u[s], first + c]
            taken[s, c] = 0.0
    total = np.empty(width)
    for stop in range(1, elements + 1):
        # as a binary counter: here ends a segment of every size that divides `stop`
        for level in range(ordered.shape[0]):
            size = 2 << level
            if stop % size and stop < elements:
                break
            start = (stop - 1) // size * size
            middle = start + size // 2
            if middle >= stop:
                continue  # a last segment without a second half
            total[:] = 0.0
            for k in range(stop - start):
                # C takes from above in u and v, so it goes down in v; its transpose goes up
                e = ordered[level, start + k if transposed else stop - 1 - k]
                if (e < middle) == transposed:
                    _add_row(total, given, e)
                else:
                    _add_to_row(taken, e, total)
    for s in range(elements):
        for c in range(width):
            result[by_u[s], first + c] = taken[s, c]
