"""A strictly upper triangular relation on labelled elements, one bit a pair, triangular half only.

Rows are kept in groups of 64. Row i of group g = i // 64 holds the columns from 64 g on, as
little-endian 64-bit words, so n elements take about n²/16 bytes: 70 kB at n = 1024, 6.4 MB at 10,000.
"""

from collections.abc import Iterator
from dataclasses import dataclass
from typing import TypeVar

import numpy as np
from numpy.typing import NDArray

from conetone.errors import OrderError

WORD = 64

Matrix = NDArray[np.bool_]
Words = NDArray[np.uint64]
Entry = TypeVar("Entry", np.bool_, np.float32, np.float64)


def words_in_a_row(elements: int) -> int:
    """Number of 64-bit words that one full row takes."""
    return -(-elements // WORD)


def words_of_triangle(elements: int) -> int:
    """Number of words of the whole packed triangle."""
    return _group_offset(elements, elements // WORD) + (elements % WORD) * _group_width(
        elements, elements // WORD
    )


def _group_width(elements: int, group: int) -> int:
    return words_in_a_row(elements) - group


def _group_offset(elements: int, group: int) -> int:
    return WORD * (group * words_in_a_row(elements) - group * (group - 1) // 2)


@dataclass(frozen=True, eq=False)
class PackedRelation:
    """An immutable relation i → j with i < j.

    `elements` is the number of elements n; `words` has shape (words_of_triangle(n),), dtype uint64.
    Raises OrderError when the words do not have that shape.
    """

    elements: int
    words: Words

    def __post_init__(self) -> None:
        expected = words_of_triangle(self.elements)
        if self.words.shape != (expected,) or self.words.dtype != np.uint64:
            raise OrderError(
                "packed relation",
                f"{self.words.dtype} words of shape {self.words.shape}",
                f"{expected} words of uint64 for {self.elements} elements",
            )
        self.words.setflags(write=False)

    @classmethod
    def from_matrix(cls, matrix: Matrix) -> "PackedRelation":
        """Pack a boolean matrix of shape (n, n).

        Raises OrderError if it is not square or has an entry on or below the diagonal, which in a
        naturally labelled order cannot be.
        """
        if matrix.ndim != 2 or matrix.shape[0] != matrix.shape[1]:
            raise OrderError("relation", f"an array of shape {matrix.shape}", "a square matrix")
        below = np.argwhere(np.tril(matrix))
        if below.size:
            i, j = below[0]
            raise OrderError(
                "relation",
                f"element {i} before element {j}",
                "only pairs i < j (a natural labelling)",
                "sort the elements so that each comes after its past",
            )
        return cls.from_row_groups(len(matrix), (matrix[s : s + WORD] for s in range(0, len(matrix), WORD)))

    @classmethod
    def from_row_groups(cls, elements: int, groups: Iterator[Matrix]) -> "PackedRelation":
        """Pack successive groups of 64 full rows (the last may be shorter), each of shape (≤ 64, n).

        Entries on and below the diagonal must be false; only this many rows are ever dense at once.
        """
        words = np.empty(words_of_triangle(elements), dtype=np.uint64)
        position = 0
        for group, rows in enumerate(groups):
            width = _group_width(elements, group)
            padded = np.zeros((len(rows), WORD * width), dtype=bool)
            padded[:, : elements - WORD * group] = rows[:, WORD * group :]
            packed = np.packbits(padded, axis=1, bitorder="little").view("<u8").astype(np.uint64, copy=False)
            words[position : position + packed.size] = packed.ravel()
            position += packed.size
        return cls(elements, words)

    def row_groups(self) -> Iterator[tuple[int, Matrix]]:
        """Yield (first row, its group of up to 64 full rows as booleans of shape (≤ 64, n))."""
        for start in range(0, self.elements, WORD):
            group = start // WORD
            rows = min(WORD, self.elements - start)
            width = _group_width(self.elements, group)
            offset = _group_offset(self.elements, group)
            packed = self.words[offset : offset + rows * width].reshape(rows, width)
            bits = np.unpackbits(packed.astype("<u8", copy=False).view(np.uint8), axis=1, bitorder="little")[
                :, : self.elements - start
            ]
            dense = np.zeros((rows, self.elements), dtype=bool)
            dense[:, start:] = bits
            yield start, dense

    def dense(self, dtype: type[Entry]) -> NDArray[Entry]:
        """The relation as a matrix of shape (n, n) of the given type, ones where i → j."""
        matrix = np.zeros((self.elements, self.elements), dtype=dtype)
        for start, rows in self.row_groups():
            matrix[start : start + len(rows)] = rows
        return matrix

    @property
    def pairs(self) -> int:
        """Number of related pairs."""
        return int(np.bitwise_count(self.words).sum(dtype=np.int64))

    def to_bytes(self) -> bytes:
        """The packed words as little-endian bytes, as stored in the orders table."""
        return self.words.astype("<u8", copy=False).tobytes()

    @classmethod
    def from_bytes(cls, elements: int, data: bytes) -> "PackedRelation":
        """Inverse of `to_bytes`; raises OrderError if the length does not fit the elements."""
        if len(data) % 8:
            raise OrderError("packed relation", f"{len(data)} bytes", "a whole number of 8-byte words")
        return cls(elements, np.frombuffer(data, dtype="<u8").astype(np.uint64))
