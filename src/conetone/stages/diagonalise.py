"""Stage diagonalise: the spectra of one operator of the orders of one block."""

from pathlib import Path
from typing import Any

from conetone.diagonalise.audit import audit
from conetone.diagonalise.full import full_spectrum
from conetone.diagonalise.leading import LeadingSpectrum, ends, leading_spectrum
from conetone.operators.catalogue import OPERATORS
from conetone.records.files import inputs_digest, read_rows
from conetone.records.provenance import blas_threads
from conetone.records.tables import SPECTRA
from conetone.sprinkle.order import Order
from conetone.stages.block import run_block
from conetone.stages.orders import order_of
from conetone.stages.sprinkle import replicate_keys
from conetone.sweep.requests import DiagonaliseRequest

RESULTS = (
    "eigenvalues",
    "residual_bound",
    "elements",
    "ordering_fraction",
    "digest",
    "sum_defect",
    "square_sum_defect",
    "pairing_defect",
    "solver",
)


def diagonalise_block(
    request: DiagonaliseRequest, orders: Path, output: Path, *, threads: int = 1, own_process: bool = False
) -> None:
    """Write the spectra table of one block; see run_block for interruptions and `own_process`.

    Raises TableError if an order is not the one its digest names.
    """
    stored = {row["replicate"]: row for row in read_rows(orders)}

    def empty(replicate: int) -> dict[str, Any]:
        return {
            **replicate_keys(request.point, replicate),
            "matrix": request.matrix,
            "part": request.part,
            "extent": request.spectrum.extent,
            "leading_count": request.spectrum.count,
            "tolerance": request.spectrum.tolerance,
            "threads": blas_threads(),
            **dict.fromkeys(RESULTS),
        }

    def compute(replicate: int) -> dict[str, Any]:
        row = stored[replicate]
        if row["status"] != "ok":
            return {"status": "failed", "reason": f"no order: {row['reason']}"}
        order = order_of(row, f"{orders}, replicate {replicate}", threads)
        found = {name: row[name] for name in ("elements", "ordering_fraction", "digest")}
        whole = request.spectrum.takes_all(order.elements)
        return {**found, **(_full(request, order) if whole else _leading(request, order, threads))}

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


def _full(request: DiagonaliseRequest, order: Order) -> dict[str, Any]:
    """Columns of a full computation, audited by sum rules; of its eigenvalues perhaps only the ends."""
    operator, count = OPERATORS[request.matrix], request.spectrum.count
    solver = request.spectrum.solver
    spectrum = full_spectrum(operator.matrix(order), request.part, solver=solver, overwrite=True)
    checks = audit(spectrum.eigenvalues, request.part, operator.square_sum(order))
    return {
        "eigenvalues": spectrum.eigenvalues
        if count is None
        else ends(spectrum.eigenvalues, request.part, count),
        "sum_defect": checks.sum_defect,
        "square_sum_defect": checks.square_sum_defect,
        "pairing_defect": checks.pairing_defect,
        "solver": spectrum.solver if count is None else f"{spectrum.solver}, ends kept",
        "status": "ok" if checks.passed else "suspect",
        "reason": None if checks.passed else f"a sum rule fails by more than {checks.tolerance:.1e}",
    }


def _leading(request: DiagonaliseRequest, order: Order, threads: int) -> dict[str, Any]:
    """Columns of a leading spectrum, audited by its residuals."""
    count, tolerance = request.spectrum.count, request.spectrum.tolerance
    assert count is not None
    assert tolerance is not None
    product = OPERATORS[request.matrix].product(order, threads)
    found = leading_spectrum(product, request.part, count, tolerance=tolerance)
    return {
        "eigenvalues": found.eigenvalues,
        "residual_bound": found.residual_bounds,
        "solver": found.solver,
        "status": "ok" if found.converged else "suspect",
        "reason": None if found.converged else _too_large(found, tolerance),
    }


def _too_large(found: LeadingSpectrum, tolerance: float) -> str:
    bounds = found.residual_bounds / (found.norm or 1.0)
    return (
        f"{(bounds > tolerance).sum()} of {len(bounds)} eigenvalues above the tolerance {tolerance:.1e}:"
        f" largest bound {bounds.max(initial=0.0):.1e} of the norm"
    )
