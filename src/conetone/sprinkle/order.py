"""A finite partial order (causal set): packed relation, natural labelling, links, height, digest."""

import hashlib
from dataclasses import dataclass, field
from functools import cached_property
from typing import Self

import numpy as np
from numpy.typing import NDArray

from conetone.errors import OrderError
from conetone.sprinkle.bits import (
    broken_triple_of,
    elements_between_of,
    height_of,
    interval_counts_of,
    links_of,
)
from conetone.sprinkle.relation import Matrix, PackedRelation


@dataclass(frozen=True, eq=False, repr=False)
class Order:
    """A partial order on the elements 0 … n − 1, naturally labelled: i precedes j only if i < j.

    `relation` is transitive; samplers guarantee it by construction, `require_transitive` checks it.
    `threads` is the number of threads that find the links.
    """

    relation: PackedRelation
    threads: int = field(default=1, kw_only=True)

    @classmethod
    def from_matrix(cls, matrix: Matrix) -> "Order":
        """The order of a strictly upper triangular boolean matrix of shape (n, n); see PackedRelation."""
        return Order(PackedRelation.from_matrix(matrix))

    def __repr__(self) -> str:
        return f"<{type(self).__name__} of {self.elements} elements>"

    @property
    def elements(self) -> int:
        """Number of elements n."""
        return self.relation.elements

    @property
    def positions(self) -> NDArray[np.float64] | None:
        """The points an order was made from, shape (n, d), read-only; None if it was made from none."""
        return None

    @property
    def positions_digest(self) -> str | None:
        """SHA-256 of the positions, in hexadecimal; None without positions."""
        return None

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
        return height_of(self.relation)

    @cached_property
    def links(self) -> PackedRelation:
        """The transitive reduction: related pairs with nothing between them."""
        return links_of(self.relation, self.threads)

    def interval_counts(self, most: int) -> NDArray[np.int64]:
        """Numbers of related pairs with exactly m elements between, m = 0 … `most`; shape (most + 1,)."""
        return interval_counts_of(self.relation, most)

    def elements_between(self) -> NDArray[np.int32]:
        """Number of elements between, for every related pair, sorted by (i, j); shape (relations,)."""
        return elements_between_of(self.relation)

    @property
    def is_transitive(self) -> bool:
        """Whether i → j → k implies i → k, for every triple."""
        return broken_triple_of(self.relation) is None

    def require_transitive(self) -> Self:
        """The order itself; raises OrderError, naming three elements, if the relation is not transitive."""
        broken = broken_triple_of(self.relation)
        if broken is not None:
            i, j, k = broken
            raise OrderError(
                "relation",
                f"{i} before {j} and {j} before {k}, but not {i} before {k}",
                "only transitive relations",
                "give every pair that is related, not the links alone",
            )
        return self

    @cached_property
    def digest(self) -> str:
        """SHA-256 of element count and packed relation, in hexadecimal: equal orders, equal digests."""
        header = f"order of {self.elements} elements\n".encode()
        digest = hashlib.sha256(header)
        digest.update(self.relation.words.astype("<u8", copy=False).data)  # no copy: it may be 0.6 GB
        return digest.hexdigest()
