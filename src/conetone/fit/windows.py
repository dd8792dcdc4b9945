"""Windows of rank that mean the same at every size, and the bins they are made of."""

import re
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from itertools import pairwise
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]

NUMBER = r"(?:[0-9]+(?:\.[0-9]+)?)"
# `1.5 * n^0.25`, `n^0.5`: a rank that grows as a power of the size.
GROWTH_PATTERN = rf"^(?:{NUMBER} \* )?n\^{NUMBER}$"


@dataclass(frozen=True)
class Growth:
    """A rank that grows with the size n as `coefficient` · n^`power`; both positive, power at most 1."""

    coefficient: float
    power: float

    @classmethod
    def parse(cls, text: str) -> "Growth":
        """Read `1.5 * n^0.25` or `n^0.5`; raises ValueError for anything else."""
        if not re.fullmatch(GROWTH_PATTERN, text):
            raise ValueError(text)
        coefficient, _, power = text.rpartition("n^")
        growth = cls(float(coefficient.rstrip(" *") or 1), float(power))
        if not (0 < growth.coefficient < float("inf") and 0 < growth.power <= 1):
            raise ValueError(text)
        return growth

    def at(self, size: int) -> float:
        """The rank at one size, a real number."""
        return self.coefficient * float(size**self.power)

    def __str__(self) -> str:
        return f"{_plain(self.coefficient)} * n^{_plain(self.power)}"


def _plain(number: float) -> str:
    return np.format_float_positional(number, trim="-")


@dataclass(frozen=True)
class Window:
    """Ranks r with first ≤ r < last, real ends."""

    first: float
    last: float


def _rank_from(end: float) -> int:
    """The first rank at or above a real end, rounding errors of the end forgiven."""
    return int(np.ceil(end - 1e-9))


@dataclass(frozen=True)
class WindowRule:
    """A window at every size: both ends grow with n."""

    first: Growth
    last: Growth

    def at(self, size: int, smallest_rank: int) -> Window:
        """The window at one size, its lower end not below `smallest_rank`."""
        return Window(max(self.first.at(size), float(smallest_rank)), self.last.at(size))

    def log_rank(self, size: int) -> float:
        """Log of the middle rank at one size, halfway between the ends in log rank; at least log 2."""
        return max(float(np.log(self.first.at(size) * self.last.at(size)) / 2), float(np.log(2)))

    def __str__(self) -> str:
        return f"{self.first} .. {self.last}"

    @classmethod
    def parse(cls, text: str) -> "WindowRule":
        """Inverse of `str`; raises ValueError for anything else."""
        first, _, last = text.partition(" .. ")
        return cls(Growth.parse(first), Growth.parse(last))


class RankAxis(Protocol):
    """Where the logs of a spectrum stand along the ranks: in bins of rank, or at smooth ranks."""

    @property
    def count(self) -> int:
        """Number of points or bins."""

    @property
    def ranks(self) -> Floats:
        """The rank of each, for the eye; shape (count,)."""

    def of(self, by_rank: Callable[[Floats], Floats]) -> Floats:
        """A function of rank as this axis sees it, shape (count,)."""

    def inside(self, window: Window) -> slice:
        """The points or bins that make up a window."""


@dataclass(frozen=True)
class RankBins:
    """Consecutive bins of rank; bin b holds the ranks edges[b] … edges[b + 1] − 1, counted from 1."""

    edges: tuple[int, ...]

    def __post_init__(self) -> None:
        if len(self.edges) < 2 or self.edges[0] < 1 or any(np.diff(self.edges) < 1):
            raise ValueError(f"rank bins need rising edges from 1 on, found {self.edges}")

    @property
    def count(self) -> int:
        """Number of bins."""
        return len(self.edges) - 1

    @property
    def last(self) -> int:
        """Largest rank in any bin."""
        return self.edges[-1] - 1

    @property
    def ranks(self) -> Floats:
        """Geometric mean rank of each bin, shape (bins,)."""
        return np.asarray(np.exp(self.of(np.log)))

    def of(self, by_rank: Callable[[Floats], Floats]) -> Floats:
        """A function of rank averaged over each bin, as the data are, shape (bins,)."""
        return self.average(by_rank(np.arange(1, self.last + 1, dtype=np.float64)))

    def average(self, by_rank: Floats) -> Floats:
        """Average a quantity given for ranks 1 … last over each bin; last axis ranks, then bins."""
        edges = np.array(self.edges)
        sums = np.add.reduceat(by_rank[..., : self.last], edges[:-1] - 1, axis=-1)
        return np.asarray(sums / np.diff(edges), dtype=np.float64)

    def inside(self, window: Window) -> slice:
        """The bins that make up a window whose ends are among the edges the bins were made of."""
        edges = np.array(self.edges)
        inside = (edges[:-1] >= _rank_from(window.first)) & (edges[1:] <= _rank_from(window.last))
        indices = np.flatnonzero(inside)
        return slice(int(indices[0]), int(indices[-1]) + 1) if indices.size else slice(0, 0)


def bins_of_windows(windows: Sequence[Window], bins: int) -> RankBins | None:
    """Log-spaced bins, about `bins` in all, of which every given window is a whole number.

    The ends of all windows are edges; each stretch between neighbouring ends is divided evenly in log rank.
    Bins without a rank of their own are merged away. None where no rank lies in any window.
    """
    ends = sorted({end for window in windows for end in (window.first, window.last)})
    total = np.log(ends[-1] / ends[0])
    edges: list[float] = []
    for low, high in pairwise(ends):
        parts = max(1, round(bins * float(np.log(high / low) / total)))
        edges.extend(np.geomspace(low, high, parts + 1))
    whole = sorted({_rank_from(edge) for edge in edges})
    return RankBins(tuple(whole)) if len(whole) > 1 else None


def bins_of_spectrum(ranks: int, bins: int) -> RankBins:
    """Log-spaced bins over all ranks 1 … ranks, at most `bins` of them, for display of a whole spectrum."""
    return RankBins(tuple(sorted({_rank_from(edge) for edge in np.geomspace(1, ranks + 1, bins + 1)})))
