"""An order as columns of the orders table, and back."""

from collections.abc import Mapping
from typing import Any

import numpy as np

from conetone.errors import TableError
from conetone.records.tables import LARGEST_PACKED
from conetone.sprinkle.catalogue import ENSEMBLES
from conetone.sprinkle.order import Order
from conetone.sprinkle.relation import PackedRelation

ORDER_COLUMNS = (
    "elements",
    "relations",
    "links",
    "height",
    "ordering_fraction",
    "digest",
    "packed_relation",
    "positions",
)


def columns_of(order: Order) -> dict[str, Any]:
    """The result columns of an order: its relation up to LARGEST_PACKED elements, beyond its positions.

    Orders without positions keep their relation at every size.
    """
    small = order.elements <= LARGEST_PACKED
    by_positions = not small and order.positions is not None
    return {
        "elements": order.elements,
        "relations": order.relations,
        "links": order.links.pairs if small else None,
        "height": order.height,
        "ordering_fraction": order.ordering_fraction if order.elements > 1 else None,
        "digest": order.positions_digest if by_positions else order.digest,
        "packed_relation": None if by_positions else order.relation.to_bytes(),
        "positions": order.positions.ravel() if by_positions and order.positions is not None else None,
    }


def order_of(row: Mapping[str, Any], place: str, threads: int = 1) -> Order:
    """The order of one row; raises TableError, naming the place, if it is not the one its digest names.

    `threads` find its relation and its links.
    """
    rebuild = ENSEMBLES[row["ensemble"]].from_positions
    if row["positions"] is None:
        relation = PackedRelation.from_bytes(row["elements"], row["packed_relation"])
        order = Order(relation, threads=threads)
        digest: str | None = order.digest
    elif rebuild is not None:
        positions = np.array(row["positions"], dtype=np.float64).reshape(row["elements"], -1)
        order = rebuild(positions, threads)
        digest = order.positions_digest
    else:
        raise TableError(place, f"positions of {row['ensemble']}", "its packed relation", "delete this file")
    if digest != row["digest"]:
        raise TableError(place, f"digest {digest}", row["digest"], "delete this file")
    return order
