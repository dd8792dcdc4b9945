"""Every eigenvalue of a part of a matrix: the one door to dense solvers."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import eigvalsh, eigvalsh_tridiagonal, lapack

from conetone.operators.catalogue import Part


@dataclass(frozen=True)
class Spectrum:
    """Eigenvalues, ascending, shape (n,), dimensionless, and the solver that found them."""

    eigenvalues: NDArray[np.float64]
    solver: str

    def __post_init__(self) -> None:
        self.eigenvalues.setflags(write=False)


def full_spectrum(matrix: NDArray[np.float64], part: Part) -> Spectrum:
    """Every eigenvalue of one part of a real matrix M of shape (n, n).

    The symmetric part is M + Mᵀ, the antisymmetric part i(M − Mᵀ), both without a factor 1/2 (Johnston
    2010). Real arithmetic through LAPACK; accurate to about n ε ‖A‖. Raises numpy.linalg.LinAlgError if an
    iteration does not converge.
    """
    if len(matrix) < 2:  # a Poisson count may draw an empty order; one element has no relations
        return Spectrum(np.zeros(len(matrix)), "none")
    if part == "symmetric":
        values = eigvalsh(matrix + matrix.T, driver="evd", overwrite_a=True, check_finite=False)
        return Spectrum(np.asarray(values, dtype=np.float64), "lapack-dsyevd")
    return Spectrum(_of_antisymmetric(matrix - matrix.T), "lapack-dgehrd-dsterf")


def _of_antisymmetric(skew: NDArray[np.float64]) -> NDArray[np.float64]:
    """Eigenvalues of iA, ascending, for a real A = −Aᵀ, which is overwritten.

    Orthogonal reduction to Hessenberg form makes an antisymmetric matrix tridiagonal, with zero diagonal
    and off-diagonals ±b. Times i, it is similar, by a diagonal of powers of i, to the real symmetric
    tridiagonal matrix of the same b (derived here).
    """
    # the transpose, in the column order LAPACK wants without a copy, is −A: the same spectrum
    workspace, _ = lapack.dgehrd_lwork(len(skew))
    reduced, _, _ = lapack.dgehrd(skew.T, lwork=int(workspace), overwrite_a=True)
    off_diagonal = (np.diagonal(reduced, -1) - np.diagonal(reduced, 1)) / 2
    values = eigvalsh_tridiagonal(np.zeros(len(skew)), off_diagonal, check_finite=False)
    return np.asarray(values, dtype=np.float64)
