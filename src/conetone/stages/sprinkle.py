"""Stage sprinkle: draw the orders of one block."""

from pathlib import Path
from typing import Any

from conetone.records.tables import ORDERS
from conetone.sprinkle.catalogue import PARAMETER_NAMES, sprinkle
from conetone.sprinkle.order import Order
from conetone.stages.block import run_block
from conetone.stages.orders import ORDER_COLUMNS, columns_of
from conetone.sweep.points import Point
from conetone.sweep.requests import SprinkleRequest
from conetone.sweep.seeds import Purpose, generator_for


def draw(point: Point, root_seed: int, replicate: int) -> Order:
    """The order of one replicate; it depends on these three and nothing else."""
    elements = point.size
    if point.choice.count == "poisson":
        counting = generator_for(root_seed, point.canonical, Purpose.ELEMENT_COUNT, replicate)
        elements = int(counting.poisson(point.size))
    generator = generator_for(root_seed, point.canonical, Purpose.SPRINKLING, replicate)
    return sprinkle(point.choice.ensemble, dict(point.choice.parameters), elements, generator)


def sprinkle_block(request: SprinkleRequest, output: Path, *, own_process: bool = False) -> None:
    """Write the orders table of one block; see run_block for interruptions and `own_process`."""
    point = request.point

    def empty(replicate: int) -> dict[str, Any]:
        return {**replicate_keys(point, replicate), **dict.fromkeys(ORDER_COLUMNS)}

    def compute(replicate: int) -> dict[str, Any]:
        return columns_of(draw(point, request.root_seed, replicate))

    replicates = range(request.first, request.stop)
    run_block(
        output,
        ORDERS,
        request.text(),
        replicates,
        compute,
        empty,
        still_valid=lambda row: row["status"] == "ok",
        own_process=own_process,
    )


def replicate_keys(point: Point, replicate: int) -> dict[str, Any]:
    """Key columns of one replicate."""
    return {
        "point": point.name,
        **point.choice.key_columns(PARAMETER_NAMES),
        "size": point.size,
        "replicate": replicate,
    }
