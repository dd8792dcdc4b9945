"""An orthonormal basis that grows by blocks, A projected onto it, and its restarts."""

from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import eigh, qr, solve_triangular

Floats = NDArray[np.float64]

EPSILON = float(np.finfo(np.float64).eps)
# Rows of the basis that one thread works on; fixed, so that sums do not depend on the number of threads.
ROWS = 8192
# Rows rotated at once in a restart: few, because they are held twice.
ROTATED_ROWS = 1024
# A block is as good as dependent, and Cholesky's factor no good, beyond this condition number.
WORST_CONDITION = 1e7
# A unit vector that loses more than half of itself along the basis was made of rounding.
MOST_LEFT = 0.5


@dataclass(frozen=True)
class Ritz:
    """Eigenvalues of the projected matrix, ascending, shape (m,), and norms of their residuals.

    `vectors`, shape (m, m), complex if A is skew, are the coefficients in the basis.
    """

    values: Floats
    residuals: Floats
    vectors: NDArray[np.float64] | NDArray[np.complex128]

    @property
    def norm(self) -> float:
        """Largest magnitude."""
        return float(np.abs(self.values).max(initial=0.0))


class Basis:
    """Orthonormal columns V of shape (n, m), the next block Q, and T = Vᵀ A V with A V = V T + Q R Eᵀ.

    A = sign · Aᵀ. T is computed in full, not only its band, so that the relation holds to rounding, and to
    what was dropped where directions ran out, which residuals include.
    """

    def __init__(
        self, elements: int, room: int, width: int, sign: int, threads: int, generator: np.random.Generator
    ) -> None:
        self.room, self.width, self.sign, self.threads = room, width, sign, threads
        self._generator = generator
        self._vectors = np.empty((elements, room), order="F")
        self._projected = np.zeros((room, room))
        self._coupling = np.zeros((width, room))
        self.length = 0
        self.blocks_since_look = 0
        self.ran_dry = False
        self._scale = 0.0
        self._dropped = 0.0
        self._next = np.linalg.qr(generator.standard_normal((elements, width)))[0]

    @property
    def is_full(self) -> bool:
        """Whether no further block fits."""
        return self.length + self.width > self.room

    def extend(self, multiply: Callable[[Floats], Floats]) -> None:
        """Append the next block, multiply it by A, and make of the remainder the block after it."""
        m, p = self.length, self.width
        here = slice(m, m + p)
        self._vectors[:, here] = self._next
        self._projected[here, :m] = self._coupling[:, :m]
        product = multiply(np.ascontiguousarray(self._next))
        self._scale = max(self._scale, float(np.linalg.norm(product, axis=0).max()))
        self.length = m + p
        self.blocks_since_look += 1
        first = self._take_off(product)
        small = self._scale * EPSILON * len(product) ** 0.5
        block, triangle, dry = _orthonormal(product, small)
        second = self._take_off(block)
        again, other, still_dry = _orthonormal(block, MOST_LEFT)
        self.ran_dry |= dry or still_dry
        coupling = other @ triangle
        if dry or still_dry:
            again, coupling = self._with_new_directions(again @ coupling, small)
        self._projected[: m + p, here] = first + second @ triangle
        self._next = again
        self._coupling[...] = 0
        self._coupling[:, here] = coupling

    def ritz(self) -> Ritz:
        """Eigenvalues of A's projection with the norms of their residuals."""
        self.blocks_since_look = 0
        m = self.length
        t = self._projected[:m, :m]
        mean = (t + self.sign * t.T) / 2
        vectors: Any
        # what the projection lacks in symmetry is rounding, and part of the residual like what was dropped
        rounding = float(np.linalg.norm(t - mean)) + self._dropped
        hermitian = mean if self.sign > 0 else 1j * mean
        values, vectors = eigh(hermitian, driver="evd", overwrite_a=True, check_finite=False)
        residuals = np.linalg.norm(self._coupling[:, :m] @ vectors, axis=0)
        return Ritz(np.asarray(values, dtype=np.float64), residuals + rounding, vectors)

    def restart(self, ritz: Ritz, each: int) -> None:
        """Keep the space of the `each` largest and `each` smallest Ritz values."""
        m = self.length
        if self.sign > 0:
            kept = np.concatenate([ritz.vectors[:, :each], ritz.vectors[:, m - each :]], axis=1)
        else:  # real and imaginary parts of a vector span the space of its pair ±
            of_pairs = ritz.vectors[:, m - each :]
            kept = np.concatenate([of_pairs.real, of_pairs.imag], axis=1)
        rotation = np.linalg.qr(kept)[0]
        for start in range(0, len(self._vectors), ROTATED_ROWS):
            rows = self._vectors[start : start + ROTATED_ROWS]
            rows[:, : 2 * each] = rows[:, :m] @ rotation
        self._projected[: 2 * each, : 2 * each] = rotation.T @ self._projected[:m, :m] @ rotation
        coupling = self._coupling[:, :m] @ rotation
        self._coupling[...] = 0
        self._coupling[:, : 2 * each] = coupling
        self.length = 2 * each
        self.ran_dry = False

    def _take_off(self, block: Floats) -> Floats:
        """Remove the components along the basis, in place; returns them, shape (m, p)."""
        vectors = self._vectors[:, : self.length]
        pieces = [slice(start, start + ROWS) for start in range(0, len(block), ROWS)]
        with ThreadPoolExecutor(self.threads) as pool:
            components = np.zeros((self.length, block.shape[1]))
            for piece in pool.map(lambda rows: vectors[rows].T @ block[rows], pieces):
                components += piece

            def subtract(rows: slice) -> None:
                block[rows] -= vectors[rows] @ components

            list(pool.map(subtract, pieces))
        return components

    def _with_new_directions(self, remainder: Floats, small: float) -> tuple[Floats, Floats]:
        """An orthonormal block that spans a remainder, shape (n, p), and random directions for what it lacks.

        Returns the block and its coefficients of the remainder. Columns are pivoted, so that what is dropped,
        and counted in `_dropped`, is below `small`.
        """
        pivoted, triangle, _ = qr(remainder, mode="economic", pivoting=True, check_finite=False)
        block = np.asarray(pivoted, dtype=np.float64)
        lacking = np.abs(np.diagonal(triangle)) <= small
        block[:, lacking] = self._generator.standard_normal((len(block), int(lacking.sum())))
        for _ in range(2):
            self._take_off(block)
            block = np.linalg.qr(block)[0]
        coefficients = block.T @ remainder
        self._dropped += float(np.linalg.norm(remainder - block @ coefficients))
        return block, coefficients


def _orthonormal(block: Floats, small: float) -> tuple[Floats, Floats, bool]:
    """Orthonormal columns and R with block = columns @ R; whether a column is, to `small`, dependent."""
    try:
        factor = np.asarray(np.linalg.cholesky(block.T @ block).T, dtype=np.float64)
        diagonal = np.abs(np.diagonal(factor))
        if diagonal.min() > small and diagonal.max() < WORST_CONDITION * diagonal.min():
            columns: Any = solve_triangular(factor, block.T, trans="T", check_finite=False).T
            return columns, factor, False
    except np.linalg.LinAlgError:
        pass
    orthonormal, triangle = np.linalg.qr(block)
    return orthonormal, triangle, bool((np.abs(np.diagonal(triangle)) <= small).any())
