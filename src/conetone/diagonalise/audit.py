"""Exact sum rules that every spectrum must obey, as relative defects."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from conetone.operators.catalogue import SpectralPart

# Backward-stable solvers stay within a small multiple of n ε ‖A‖; 20 leaves room for the constant.
SAFETY = 20.0


@dataclass(frozen=True)
class Audit:
    """Relative defects of a spectrum, dimensionless; `passed` if all stay below `tolerance` = 20 n ε.

    `sum_defect`: |Σ λ| / (n ‖A‖). `square_sum_defect`: |Σ λ² − 2 Σ M²| / (n ‖A‖²).
    `pairing_defect`: max |λ_i + λ_(n+1−i)| / ‖A‖ of an antisymmetric part, None for a symmetric one.
    Of singular values s, `square_sum_defect` is |Σ s² − Σ M²| / (n ‖M‖²), and the others are None.
    """

    sum_defect: float | None
    square_sum_defect: float
    pairing_defect: float | None
    tolerance: float

    @property
    def passed(self) -> bool:
        """Whether every defect is finite and below the tolerance."""
        defects = (self.sum_defect or 0.0, self.square_sum_defect, self.pairing_defect or 0.0)
        return all(defect <= self.tolerance for defect in defects)


def audit(eigenvalues: NDArray[np.float64], part: SpectralPart, square_sum: float) -> Audit:
    """Hold a full spectrum against Σ λ = 0, Σ λ² = 2 Σ M² and, if antisymmetric, the pairing ±λ.

    Singular values are held against Σ s² = Σ M² alone.

    `eigenvalues` ascending, shape (n,); `square_sum` is Σ M² of the matrix M behind the part, for the
    causal matrix the number of relations. The sums are traces of A, A² and MᵀM (exact for any order).
    """
    n = max(len(eigenvalues), 1)
    norm = float(np.abs(eigenvalues).max(initial=0.0)) or 1.0
    pairing = None
    if part == "antisymmetric":
        pairing = float(np.abs(eigenvalues + eigenvalues[::-1]).max(initial=0.0)) / norm
    trace = square_sum if part == "singular" else 2 * square_sum
    return Audit(
        sum_defect=None if part == "singular" else abs(float(eigenvalues.sum())) / (n * norm),
        square_sum_defect=abs(float(eigenvalues @ eigenvalues) - trace) / (n * norm**2),
        pairing_defect=pairing,
        tolerance=SAFETY * n * float(np.finfo(np.float64).eps),
    )
