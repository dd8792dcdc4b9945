"""Row groups of a packed triangle shared among threads, by equal numbers of words."""

from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from itertools import pairwise

import numpy as np

from conetone.sprinkle.relation import words_in_a_row

# Rows differ in cost by more than their length, so threads take many small ranges in turn.
RANGES_PER_THREAD = 8


def ranges_of_groups(elements: int, parts: int) -> list[tuple[int, int]]:
    """At most `parts` ranges (first, last + 1) of groups of 64 rows, none empty, about equal in words."""
    groups = words_in_a_row(elements)
    done = np.cumsum(np.arange(groups, 0, -1))
    shares = np.arange(1, parts + 1) * (groups * (groups + 1) / 2 / parts)
    bounds = [0, *(np.searchsorted(done, shares - 0.5) + 1).clip(max=groups).tolist()]
    return [(first, last) for first, last in pairwise(bounds) if first < last]


def over_groups(elements: int, threads: int, work: Callable[[int, int], None]) -> None:
    """Call `work(first, last + 1)` on ranges that cover every group once; it must release the GIL."""
    if threads == 1:
        work(0, words_in_a_row(elements))
        return
    with ThreadPoolExecutor(threads) as pool:
        ranges = ranges_of_groups(elements, threads * RANGES_PER_THREAD)
        for done in [pool.submit(work, first, last) for first, last in ranges]:
            done.result()
