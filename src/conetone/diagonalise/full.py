"""Every eigenvalue or singular value of a matrix: the one door to dense solvers."""

from dataclasses import dataclass
from typing import Literal, get_args

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import eigvalsh, eigvalsh_tridiagonal, lapack, svdvals

from conetone.diagonalise.band import Tridiagonal, reduce_to_tridiagonal
from conetone.diagonalise.blas import eigenvalues_of_tridiagonal, singular_values_of_bidiagonal
from conetone.errors import MatrixError
from conetone.operators.catalogue import SpectralPart
from conetone.operators.square import zero_matrix

Floats = NDArray[np.float64]

Solver = Literal["auto", "two-stage", "lapack"]
SOLVERS: tuple[Solver, ...] = get_args(Solver)

# `auto` takes LAPACK below these sizes: measured by tests/bench/test_crossover.py.
CROSSOVER = {"symmetric": 1400, "antisymmetric": 500}
# Half-bandwidth between the stages: wider bands make faster products, narrower ones are chased sooner.
WIDTH = 64
# Rows or columns folded at once.
FOLD = 512


@dataclass(frozen=True)
class Spectrum:
    """Eigenvalues or singular values, ascending, shape (n,), dimensionless, and what found them."""

    eigenvalues: Floats
    solver: str

    def __post_init__(self) -> None:
        self.eigenvalues.setflags(write=False)


def full_spectrum(
    matrix: Floats, part: SpectralPart, *, solver: Solver = "auto", overwrite: bool = False
) -> Spectrum:
    """Every eigenvalue of one part of a real matrix M of shape (n, n).

    The symmetric part is M + Mᵀ, the antisymmetric part i(M − Mᵀ), both without a factor 1/2 (Johnston
    2010). Real arithmetic; accurate to about n ε ‖A‖. `two-stage` reduces to a band, then to tridiagonal
    form, in place: with `overwrite` M is destroyed, and memory stays near that of M. `lapack` is slower,
    takes three times the memory, and shares no code with it but BLAS; `auto` takes whichever is faster.
    `singular` stands for the singular values of M, which only LAPACK finds. Raises MatrixError if M is not
    square or not finite, or if singular values are to be found in two stages; numpy.linalg.LinAlgError if an
    iteration does not converge.
    """
    _check(matrix)
    n = len(matrix)
    if n < 2:  # a Poisson count may draw an empty order; one element has no relations
        diagonal = matrix.diagonal()
        of_one = {"symmetric": 2 * diagonal, "antisymmetric": np.zeros(n), "singular": np.abs(diagonal)}
        return Spectrum(np.array(of_one[part], dtype=np.float64), "none")
    if part == "singular":
        if solver == "two-stage":
            raise MatrixError("solver", solver, "auto or lapack for singular values")
        # of the transpose, in the column order LAPACK wants
        falling = svdvals(matrix.T, overwrite_a=overwrite, check_finite=False)
        return Spectrum(np.asarray(falling[::-1], dtype=np.float64), "lapack-dgesdd")
    if solver == "auto":
        solver = "lapack" if n < CROSSOVER[part] else "two-stage"
    if solver == "two-stage":
        work = matrix if overwrite and _is_plain(matrix) else _copied(matrix)
        return Spectrum(_in_two_stages(work, part), "two-stage")
    if part == "symmetric":
        values = eigvalsh(matrix + matrix.T, driver="evd", overwrite_a=True, check_finite=False)
        return Spectrum(np.asarray(values, dtype=np.float64), "lapack-dsyevd")
    return Spectrum(_by_hessenberg(matrix - matrix.T), "lapack-dgehrd-dsterf")


def _check(matrix: Floats) -> None:
    if matrix.ndim != 2 or matrix.shape[0] != matrix.shape[1]:
        raise MatrixError("matrix", f"an array of shape {matrix.shape}", "a square matrix")
    for start in range(0, len(matrix), FOLD):
        rows = matrix[start : start + FOLD]
        if np.isfinite(rows.sum(dtype=np.float64)):
            continue
        bad = np.argwhere(~np.isfinite(rows))  # none, if only the sum is too large
        if bad.size:
            i, j = bad[0][0] + start, bad[0][1]
            raise MatrixError(f"matrix[{i}, {j}]", str(matrix[i, j]), "finite numbers")


def _in_two_stages(matrix: Floats, part: SpectralPart) -> Floats:
    sign = 1 if part == "symmetric" else -1
    if matrix.strides[0] == matrix.itemsize:
        matrix = matrix.T  # the same part, but for a sign
    _fold(matrix, sign)
    # the transpose of a row-major upper triangle is the column-major lower triangle of the same part, but
    # for a sign that the pairing ± of an antisymmetric part makes immaterial
    tridiagonal = reduce_to_tridiagonal(matrix.T, sign, WIDTH)
    if part == "symmetric":
        return eigenvalues_of_tridiagonal(tridiagonal.diagonal, tridiagonal.off_diagonal)
    return _of_skew_tridiagonal(tridiagonal)


def _is_plain(matrix: Floats) -> bool:
    """Whether BLAS can work on it: float64, rows or columns without gaps, none of them running backwards."""
    return matrix.dtype == np.float64 and matrix.itemsize in matrix.strides and min(matrix.strides) > 0


def _copied(matrix: Floats) -> Floats:
    copy = zero_matrix(len(matrix))
    copy[...] = matrix
    return copy


def _fold(matrix: Floats, sign: int) -> None:
    """Add ± the transposed lower triangle to the upper one, in place."""
    n = len(matrix)
    for start in range(0, n, FOLD):
        stop = min(start + FOLD, n)
        block = matrix[start:stop, start:stop]
        block += sign * block.T.copy()
        matrix[start:stop, stop:] += sign * matrix[stop:, start:stop].T


def _of_skew_tridiagonal(tridiagonal: Tridiagonal) -> Floats:
    """Eigenvalues of iT, ascending, for T with zero diagonal and off-diagonals ±b.

    Even and odd rows first, T is [[0, B], [−Bᵀ, 0]] with B bidiagonal of half the size (b₁, b₃, … on its
    diagonal): the eigenvalues are ± its singular values, and an exact zero if n is odd (derived here).
    """
    b = tridiagonal.off_diagonal
    pairs = (len(b) + 1) // 2
    if len(b) % 2 == 0:  # n odd: a zero row makes B square
        b = np.append(b, 0.0)
        falling = singular_values_of_bidiagonal(b[0::2], b[1::2])[:pairs]
        return np.concatenate([-falling, [0.0], falling[::-1]])
    falling = singular_values_of_bidiagonal(b[0::2], b[1::2])
    return np.concatenate([-falling, falling[::-1]])


def _by_hessenberg(skew: Floats) -> Floats:
    """Eigenvalues of iA, ascending, for a real A = −Aᵀ, which is overwritten, through LAPACK.

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
