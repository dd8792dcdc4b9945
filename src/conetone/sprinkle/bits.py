"""What follows from a packed relation, bit-parallel: links, height, transitivity, intervals.

Kernels copy with loops: an assignment from slice to slice takes Numba seconds to compile.

Row i keeps words i // 64 … of a full row, so word w of it stands at `_origin(n, i) + w`.
"""

import numpy as np
from numpy.typing import NDArray

from conetone.kernels import inner, kernel
from conetone.sprinkle.groups import over_groups
from conetone.sprinkle.relation import WORD, PackedRelation, Words, words_in_a_row

Counts = NDArray[np.int64]


def links_of(relation: PackedRelation, threads: int = 1) -> PackedRelation:
    """The transitive reduction of a transitive relation: pairs with nothing between them."""
    links = np.empty_like(relation.words)
    over_groups(
        relation.elements,
        threads,
        lambda first, last: reduce_rows(relation.elements, relation.words, links, first, last),
    )
    return PackedRelation(relation.elements, links)


def height_of(relation: PackedRelation) -> int:
    """Number of elements in the longest chain of a transitive relation; 0 without elements."""
    return int(longest_chain(relation.elements, relation.words))


def broken_triple_of(relation: PackedRelation) -> tuple[int, int, int] | None:
    """Elements i → j → k without i → k; None if the relation is transitive."""
    triple = np.empty(3, dtype=np.int64)
    if breaks_transitivity(relation.elements, relation.words, triple):
        i, j, k = triple.tolist()
        return i, j, k
    return None


def interval_counts_of(relation: PackedRelation, most: int) -> Counts:
    """Numbers of related pairs with exactly m elements between, m = 0 … `most`; shape (most + 1,)."""
    counts = np.zeros(most + 2, dtype=np.int64)
    nowhere = np.empty(0, dtype=np.int64)
    measure_intervals(relation.elements, relation.words, counts, nowhere, nowhere.astype(np.int32))
    return counts[:-1]


def elements_between_of(relation: PackedRelation) -> NDArray[np.int32]:
    """Number of elements between i and j for every related pair, sorted by (i, j); shape (pairs,)."""
    n = relation.elements
    widths = words_in_a_row(n) - np.arange(n) // WORD
    successors = np.add.reduceat(np.bitwise_count(relation.words), np.cumsum(widths) - widths, dtype=np.int64)
    place = np.cumsum(successors) - successors
    between = np.empty(relation.pairs, dtype=np.int32)
    measure_intervals(n, relation.words, np.zeros(n + 1, dtype=np.int64), place, between)
    return between


@inner
def _origin(elements: int, i: int) -> int:
    """Where word 0 of row i would stand in the packed triangle."""
    group = i // WORD
    row_words = (elements + WORD - 1) // WORD
    before = WORD * (group * row_words - group * (group - 1) // 2)
    return before + (i - WORD * group) * (row_words - group) - group


@inner
def _ones(word: np.uint64) -> int:
    """Number of bits set; the compiler makes one instruction of this pattern."""
    word = word - ((word >> np.uint64(1)) & np.uint64(0x5555555555555555))
    word = (word & np.uint64(0x3333333333333333)) + ((word >> np.uint64(2)) & np.uint64(0x3333333333333333))
    word = (word + (word >> np.uint64(4))) & np.uint64(0x0F0F0F0F0F0F0F0F)
    return int(np.int64((word * np.uint64(0x0101010101010101)) >> np.uint64(56)))


@inner
def _lowest(word: np.uint64) -> int:
    """Number of the lowest bit set, of a word that is not 0."""
    return _ones((word & (~word + np.uint64(1))) - np.uint64(1))


@inner
def _above(bit: int) -> np.uint64:
    """A word with all bits above one set."""
    return np.uint64(0xFFFFFFFFFFFFFFFE) << np.uint64(bit)


@kernel("void(int64, Array(uint64, 1, 'C', readonly=True), uint64[::1], int64, int64)")
def reduce_rows(elements: int, words: Words, links: Words, first: int, last: int) -> None:
    """Write the links of the rows of the groups from `first` to before `last`.

    In a natural labelling the first successor of i is a link, and whatever comes after it is none; of the
    successors that remain, the first is again a link.
    """
    row_words = (elements + WORD - 1) // WORD
    for i in range(WORD * first, min(WORD * last, elements)):
        own = _origin(elements, i)
        for k in range(own + i // WORD, own + row_words):
            links[k] = words[k]
        for w in range(i // WORD, row_words):
            rest = links[own + w]
            while rest:
                bit = _lowest(rest)
                other = _origin(elements, WORD * w + bit)
                left, after = links[own + w : own + row_words], words[other + w : other + row_words]
                for k in range(row_words - w):
                    left[k] &= ~after[k]
                rest = links[own + w] & _above(bit)


@kernel("int64(int64, Array(uint64, 1, 'C', readonly=True))")
def longest_chain(elements: int, words: Words) -> int:
    """Number of elements in the longest chain."""
    longest = np.empty(elements, np.int32)
    longest[:] = 1
    row_words = (elements + WORD - 1) // WORD
    height = 0
    for i in range(elements):
        # a natural labelling makes longest[i] final before row i is read, so one pass suffices
        height = max(height, longest[i])
        own = _origin(elements, i)
        for w in range(i // WORD, row_words):
            rest = words[own + w]
            while rest:
                j = WORD * w + _lowest(rest)
                longest[j] = max(longest[j], longest[i] + 1)
                rest &= rest - np.uint64(1)
    return height


@kernel("boolean(int64, Array(uint64, 1, 'C', readonly=True), int64[::1])")
def breaks_transitivity(elements: int, words: Words, triple: Counts) -> bool:
    """Whether i → j → k without i → k, and the triple of it.

    Rows from the last up: with all later rows transitive, row i need only hold the rows of its links.
    """
    row_words = (elements + WORD - 1) // WORD
    left = np.empty(row_words, np.uint64)
    for i in range(elements - 1, -1, -1):
        own = _origin(elements, i)
        for k in range(i // WORD, row_words):
            left[k] = words[own + k]
        for w in range(i // WORD, row_words):
            rest = left[w]
            while rest:
                bit = _lowest(rest)
                other = _origin(elements, WORD * w + bit)
                for k in range(w, row_words):
                    missing = words[other + k] & ~words[own + k]
                    if missing:
                        triple[0], triple[1], triple[2] = i, WORD * w + bit, WORD * k + _lowest(missing)
                        return True
                    left[k] &= ~words[other + k]
                rest = left[w] & _above(bit)
    return False


@inner
def _transpose(block: Words) -> None:
    """Transpose 64 × 64 bits in place, swapping blocks of half the size each time (Warren 2002)."""
    half, mask = 32, np.uint64(0x00000000FFFFFFFF)
    while half:
        for k in range(WORD):
            if not k & half:
                swap = ((block[k] >> np.uint64(half)) ^ block[k + half]) & mask
                block[k] ^= swap << np.uint64(half)
                block[k + half] ^= swap
        half //= 2
        mask ^= mask << np.uint64(half)


@inner
def _pasts(elements: int, words: Words, group: int, pasts: NDArray[np.uint64]) -> None:
    """For each of the 64 elements of a group, the bits of all before it; shape (64, > group)."""
    block = np.empty(WORD, np.uint64)
    for earlier in range(group + 1):
        block[:] = 0
        for row in range(min(WORD, elements - WORD * earlier)):
            block[row] = words[_origin(elements, WORD * earlier + row) + group]
        _transpose(block)
        for column in range(WORD):
            pasts[column, earlier] = block[column]


@kernel("void(int64, Array(uint64, 1, 'C', readonly=True), int64[::1], int64[::1], int32[::1])")
def measure_intervals(
    elements: int, words: Words, counts: Counts, place: Counts, sizes: NDArray[np.int32]
) -> None:
    """Add to counts[m] the number of related pairs with m elements between, to the last those with more.

    Unless `sizes` has no room, write there the number of every pair (at most the last m), those of row i
    from place[i] on, which is moved.
    """
    row_words = (elements + WORD - 1) // WORD
    most = counts.size - 1
    pasts = np.empty((WORD, row_words), np.uint64)
    for group in range(row_words):
        _pasts(elements, words, group, pasts)
        for i in range(min(WORD * (group + 1), elements)):
            own = _origin(elements, i)
            future = words[own + i // WORD : own + group + 1]
            rest = future[group - i // WORD]
            while rest:
                past = pasts[_lowest(rest), i // WORD : group + 1]
                rest &= rest - np.uint64(1)
                between = 0
                for k in range(future.size):
                    between += _ones(future[k] & past[k])
                    if between >= most:
                        between = most
                        break
                counts[between] += 1
                if sizes.size:
                    sizes[place[i]] = between
                    place[i] += 1
