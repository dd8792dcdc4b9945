"""A finite partial order (causal set): packed relation, natural labelling, links, height, digest."""

import hashlib
from dataclasses import dataclass
from functools import cached_property

import numpy as np

from conetone.sprinkle.relation import WORD, Matrix, PackedRelation

# Rows multiplied at once when links are found: enough for BLAS to be busy, little memory.
LINK_ROWS = 4 * WORD


@dataclass(frozen=True, eq=False)
class Order:
    """A partial order on the elements 0 … n − 1, naturally labelled: i precedes j only if i < j.

    `relation` is transitive; samplers guarantee it by construction, `is_transitive` checks it.
    """

    relation: PackedRelation

    @classmethod
    def from_matrix(cls, matrix: Matrix) -> "Order":
        """The order of a strictly upper triangular boolean matrix of shape (n, n); see PackedRelation."""
        return cls(PackedRelation.from_matrix(matrix))

    @property
    def elements(self) -> int:
        """Number of elements n."""
        return self.relation.elements

    @cached_property
    def relations(self) -> int:
        """Number of related pairs."""
        return self.relation.pairs

    @property
    def ordering_fraction(self) -> float:
        """Related pairs over all pairs, 2 R / (n (n − 1)); NaN below two elements."""
        n = self.elements
        return 2 * self.relations / (n * (n - 1)) if n > 1 else float("nan")

    @cached_property
    def height(self) -> int:
        """Number of elements in the longest chain."""
        longest = np.ones(self.elements, dtype=np.int64)
        for start, rows in self.relation.row_groups():
            for i, row in enumerate(rows, start):
                # a natural labelling makes longest[i] final before row i is read, so one pass suffices
                np.maximum(longest, longest[i] + 1, out=longest, where=row)
        return int(longest.max(initial=0))

    @cached_property
    def links(self) -> PackedRelation:
        """The transitive reduction: related pairs with nothing between them."""
        return PackedRelation.from_matrix(self.relation.dense(np.bool_) & ~self._has_element_between())

    @property
    def is_transitive(self) -> bool:
        """Whether i → j → k implies i → k, for every triple."""
        return not bool((self._has_element_between() & ~self.relation.dense(np.bool_)).any())

    def _has_element_between(self) -> Matrix:
        # Counts of elements between two others stay below 2²⁴, where float32 is exact.
        dense = self.relation.dense(np.float32)
        between = np.zeros(dense.shape, dtype=bool)
        for start in range(0, self.elements, LINK_ROWS):
            rows = dense[start : start + LINK_ROWS, start:]
            between[start : start + LINK_ROWS, start:] = rows @ dense[start:, start:] > 0
        return between

    @cached_property
    def digest(self) -> str:
        """SHA-256 of element count and packed relation, in hexadecimal: equal orders, equal digests."""
        header = f"order of {self.elements} elements\n".encode()
        return hashlib.sha256(header + self.relation.to_bytes()).hexdigest()
