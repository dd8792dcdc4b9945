"""Every eigenvalue of a part of a matrix: the one door to dense solvers."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import eigvalsh

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
    2010). LAPACK's dsyevd and zheevd; accurate to about n ε ‖A‖. Raises numpy.linalg.LinAlgError if the
    iteration does not converge.
    """
    if not len(matrix):  # an empty order, which a Poisson count may draw
        return Spectrum(np.empty(0), "none")
    if part == "symmetric":
        values = eigvalsh(matrix + matrix.T, driver="evd", overwrite_a=True, check_finite=False)
        return Spectrum(values, "lapack-dsyevd")
    values = eigvalsh(1j * (matrix - matrix.T), driver="evd", overwrite_a=True, check_finite=False)
    return Spectrum(values, "lapack-zheevd")
