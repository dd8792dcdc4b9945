"""Stage diagonalise: the spectra of one operator of the orders of one block."""

from pathlib import Path
from typing import Any

from conetone.diagonalise.audit import audit
from conetone.diagonalise.full import full_spectrum
from conetone.errors import TableError
from conetone.operators.catalogue import OPERATORS
from conetone.records.files import inputs_digest, read_rows
from conetone.records.provenance import blas_threads
from conetone.records.tables import SPECTRA
from conetone.sprinkle.order import Order
from conetone.sprinkle.relation import PackedRelation
from conetone.stages.block import run_block
from conetone.stages.sprinkle import replicate_keys
from conetone.sweep.requests import DiagonaliseRequest

RESULTS = (
    "eigenvalues",
    "elements",
    "ordering_fraction",
    "digest",
    "sum_defect",
    "square_sum_defect",
    "pairing_defect",
    "solver",
)


def diagonalise_block(
    request: DiagonaliseRequest, orders: Path, output: Path, *, own_process: bool = False
) -> None:
    """Write the spectra table of one block; see run_block for interruptions and `own_process`.

    Raises TableError if an order is not the one its digest names.
    """
    stored = {row["replicate"]: row for row in read_rows(orders)}
    operator = OPERATORS[request.matrix]

    def empty(replicate: int) -> dict[str, Any]:
        return {
            **replicate_keys(request.point, replicate),
            "matrix": request.matrix,
            "part": request.part,
            "extent": request.extent,
            "threads": blas_threads(),
            **dict.fromkeys(RESULTS),
        }

    def compute(replicate: int) -> dict[str, Any]:
        row = stored[replicate]
        if row["status"] != "ok":
            return {"status": "failed", "reason": f"no order: {row['reason']}"}
        order = Order(PackedRelation.from_bytes(row["elements"], row["packed_relation"]))
        if order.digest != row["digest"]:
            raise TableError(
                f"{orders}, replicate {replicate}",
                f"digest {order.digest}",
                row["digest"],
                "delete this file",
            )
        spectrum = full_spectrum(operator.matrix(order), request.part)
        checks = audit(spectrum.eigenvalues, request.part, operator.square_sum(order))
        return {
            "eigenvalues": spectrum.eigenvalues,
            "elements": order.elements,
            "ordering_fraction": row["ordering_fraction"],
            "digest": row["digest"],
            "sum_defect": checks.sum_defect,
            "square_sum_defect": checks.square_sum_defect,
            "pairing_defect": checks.pairing_defect,
            "solver": spectrum.solver,
            "status": "ok" if checks.passed else "suspect",
            "reason": None if checks.passed else f"a sum rule fails by more than {checks.tolerance:.1e}",
        }

    run_block(
        output,
        SPECTRA,
        request.text(),
        range(request.first, request.stop),
        compute,
        empty,
        still_valid=lambda row: row["status"] == "ok" and row["digest"] == stored[row["replicate"]]["digest"],
        inputs=inputs_digest([orders]),
        own_process=own_process,
    )
