"""Blocks: the replicates of a point that one job computes.

The length of a block follows from the size alone, so that a sweep that grows keeps its blocks.
"""

from collections.abc import Iterator
from dataclasses import dataclass

from conetone.sweep.points import Point

# Short enough that two cores stay busy, long enough that starting Python does not matter.
TARGET_SECONDS = 20.0
LONGEST_BLOCK = 500
# A replicate of n = 1000, seconds, growing as n³. No forecast: it stays as it is whatever the solver, the
# machine and the spectra, because blocks of another length would draw their orders again.
SECONDS_AT_1000 = 0.21


@dataclass(frozen=True)
class Block:
    """Replicates first … stop − 1 of a point; `number` counts the point's blocks from 0."""

    point: Point
    number: int
    first: int
    stop: int

    @property
    def name(self) -> str:
        """File name stem of the block's orders."""
        return f"{self.point.name}-b{self.number:04d}"

    @property
    def replicates(self) -> range:
        """The replicates of this block."""
        return range(self.first, self.stop)


def block_length(point: Point) -> int:
    """Replicates that one job computes at a point."""
    slowest = SECONDS_AT_1000 * float(point.size / 1000) ** 3
    return max(1, min(LONGEST_BLOCK, int(TARGET_SECONDS / slowest)))


def blocks_of(point: Point, replicates: int) -> Iterator[Block]:
    """The blocks of a point, in order; only the last may be shorter than the others."""
    length = block_length(point)
    for number, first in enumerate(range(0, replicates, length)):
        yield Block(point, number, first, min(first + length, replicates))
