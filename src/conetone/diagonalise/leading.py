"""The largest eigenvalues of each sign, or singular values, of a matrix of which only products are known.

A block Krylov method with full orthogonalisation and thick restarts (Wu & Simon 2000, SIAM J. Matrix Anal.
Appl. 22, 602), in real arithmetic for both parts: the projection of an antisymmetric part is real and skew.
The singular values s of M are the positive eigenvalues of [[0, M], [Mᵀ, 0]], whose spectrum is ±s.
"""

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from conetone.diagonalise.basis import EPSILON, Basis
from conetone.diagonalise.full import full_spectrum
from conetone.errors import MatrixError
from conetone.operators.catalogue import SpectralPart
from conetone.operators.product import Doubled, Product

Floats = NDArray[np.float64]

# Vectors multiplied at once: as many as the packed product takes in one pass. Eigenvalues of a higher
# multiplicity than this are found only after the spaces of the first copies are exhausted.
BLOCK = 8
# Room for the basis, in multiples of the eigenvalues wanted, and blocks besides: more saves few products.
BASIS, SPARE_BLOCKS = 1.6, 6
# Of that room, what a restart keeps.
KEPT = 0.7
MOST_RESTARTS = 60
# Looks at the convergence, each an eigenproblem of the basis' size, while the basis is filled.
LOOKS = 10
# Rounding: of a dense solver in units of n ε ‖A‖, of a residual in units of ε ‖A‖ per basis vector.
DENSE_SAFETY, SAFETY = 20.0, 4.0


@dataclass(frozen=True)
class LeadingSpectrum:
    """The `count` largest and `count` smallest eigenvalues, or the `count` largest singular values.

    All of them, if there are no more.

    `eigenvalues` ascending and `residual_bounds`, of the same shape, absolute: an eigenvalue of A lies at
    most that far from the one given. `norm` is ‖A‖, `products` the number of vectors multiplied.
    `converged` says whether every bound is below the tolerance times ‖A‖.
    """

    eigenvalues: Floats
    residual_bounds: Floats
    converged: bool
    norm: float
    products: int
    solver: str

    def __post_init__(self) -> None:
        self.eigenvalues.setflags(write=False)
        self.residual_bounds.setflags(write=False)


def leading_spectrum(
    product: Product,
    part: SpectralPart,
    count: int,
    *,
    tolerance: float = 1e-9,
    generator: np.random.Generator | None = None,
) -> LeadingSpectrum:
    """The `count` largest eigenvalues of each sign of one part of a matrix M, or its largest singular values.

    Parts as in full_spectrum.

    `product.apply(X)` gives (M X, Mᵀ X). Residuals are brought below `tolerance` ‖A‖; if that takes more than
    MOST_RESTARTS restarts, `converged` is false. The start is drawn from `generator`, by default always the
    same, so that the same matrix gives the same numbers. Where the eigenvalues wanted are a large
    part of all, the matrix is made dense and every eigenvalue computed.
    """
    if count < 1:
        raise MatrixError("count", str(count), "a whole number from 1")
    n, wanted = product.elements, 2 * count
    room = BLOCK * (int(BASIS * wanted) // BLOCK + SPARE_BLOCKS)
    if n < 2 * room:
        return _of_the_dense_matrix(product, part, count)
    sign = -1 if part == "antisymmetric" else 1
    floor = SAFETY * room * EPSILON
    if not tolerance >= floor:
        raise MatrixError("tolerance", f"{tolerance:.1e}", f"at least {floor:.1e} for {count} of each sign")
    generator = generator if generator is not None else np.random.Generator(np.random.Philox(0))
    if part == "singular":
        product = Doubled(product)

    def multiply(block: Floats) -> Floats:
        forward, backward = product.apply(block)
        forward += sign * backward
        return forward

    basis = Basis(product.elements, room, BLOCK, sign, product.threads, generator)
    found = _iterate(basis, multiply, count, tolerance)
    return _largest_singular_values(found, count) if part == "singular" else found


def _largest_singular_values(pairs: LeadingSpectrum, count: int) -> LeadingSpectrum:
    """Those among the eigenvalues ±s; what rounding took below zero is put back, and its bound widened."""
    values, bounds = pairs.eigenvalues[-count:], pairs.residual_bounds[-count:]
    return replace(
        pairs,
        eigenvalues=np.maximum(values, 0.0),
        residual_bounds=bounds + np.maximum(-values, 0.0),
    )


def _iterate(
    basis: Basis, multiply: Callable[[Floats], Floats], count: int, tolerance: float
) -> LeadingSpectrum:
    restarts, products = 0, 0
    while True:
        basis.extend(multiply)
        products += BLOCK
        full = basis.is_full
        # a basis that ran out of new directions has seen no more than BLOCK copies of an eigenvalue
        due = basis.length >= 2 * count + BLOCK and basis.blocks_since_look >= basis.room // (LOOKS * BLOCK)
        if not full and (basis.ran_dry or not due):
            continue
        ritz = basis.ritz()
        chosen = np.concatenate([np.arange(count), np.arange(len(ritz.values) - count, len(ritz.values))])
        bounds = ritz.residuals[chosen] + SAFETY * basis.length * EPSILON * ritz.norm
        converged = bool((bounds <= tolerance * max(ritz.norm, np.finfo(np.float64).tiny)).all())
        if converged or (full and restarts == MOST_RESTARTS):
            return LeadingSpectrum(
                ritz.values[chosen], bounds, converged, ritz.norm, products, "block-krylov"
            )
        if full:
            basis.restart(ritz, int(KEPT * basis.room) // 2)
            restarts += 1


def _of_the_dense_matrix(product: Product, part: SpectralPart, count: int) -> LeadingSpectrum:
    n = product.elements
    matrix, _ = product.apply(np.eye(n))
    spectrum = full_spectrum(matrix, part)
    norm = float(np.abs(spectrum.eigenvalues).max(initial=0.0))
    values = ends(spectrum.eigenvalues, part, count)
    bounds = np.full(len(values), DENSE_SAFETY * n * EPSILON * norm)
    return LeadingSpectrum(values.copy(), bounds, True, norm, n, f"dense {spectrum.solver}")


def ends(spectrum: Floats, part: SpectralPart, count: int) -> Floats:
    """The `count` first and last of ascending eigenvalues, or the last of singular values; at most all."""
    if part == "singular":
        return spectrum[-count:]
    return spectrum if len(spectrum) <= 2 * count else np.concatenate([spectrum[:count], spectrum[-count:]])
