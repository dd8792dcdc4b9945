"""Two-stage reduction of a symmetric or skew-symmetric matrix to tridiagonal form, in place.

First to a band by blocked Householder reflections, nearly all of it matrix products; then from the band
to tridiagonal by chasing bulges (Bischof, Lang & Sun 2000, ACM TOMS 26, 581). No eigenvectors.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from conetone.diagonalise.blas import factor_panel, multiply_into
from conetone.diagonalise.chase import chase_bulges

Floats = NDArray[np.float64]

# Blocks of the trailing matrix no larger than this are multiplied whole, both triangles.
SMALLEST_BLOCK = 128


@dataclass(frozen=True)
class Tridiagonal:
    """Diagonal, shape (n,), and the entries below it, shape (n − 1,)."""

    diagonal: Floats
    off_diagonal: Floats


def reduce_to_tridiagonal(lower: Floats, sign: int, width: int) -> Tridiagonal:
    """A tridiagonal T = Qᵀ A Q, Q orthogonal, of A = sign · Aᵀ, sign 1 or −1.

    `lower` is column-major of shape (n, n); its lower triangle holds A, and is overwritten, the upper
    is finite and not used. `width` is the half-bandwidth in between.
    """
    band = _band_columns(lower, sign, width)
    if band.shape[1] > 2:
        chase_bulges(band, float(sign))
    return Tridiagonal(band[:, 0].copy(), band[:-1, 1].copy())


def _band_columns(lower: Floats, sign: int, width: int) -> Floats:
    """Reduce to half-bandwidth b; result[j, d] is entry (j + d, j) of the band, shape (n, 2 b).

    Distances beyond b are room for the bulges.
    """
    n = len(lower)
    step = _TrailingUpdate(n, sign, width)
    for first in range(0, n - width - 1, width):
        below = first + width
        panel = lower[below:, first : first + width]
        factor_panel(panel, step.triangle)
        step.apply(panel, lower[below:, below:])
    columns = np.zeros((n, 2 * width))
    for j in range(n):
        inside = lower[j : j + width + 1, j]
        columns[j, : len(inside)] = inside
    if sign < 0:
        columns[:, 0] = 0  # exactly; updates leave rounding there
    return columns


class _TrailingUpdate:
    """S ← Qᵀ S Q for the trailing matrix S, of which the lower triangle is stored, and Q = I − V T Vᵀ.

    With X = S V T, M = TᵀVᵀX and W = X − V M / 2 this is S − W Vᵀ − V Wᵀ if S is symmetric, and
    S − W Vᵀ + V Wᵀ if it is skew (derived here, from (S V)ᵀ = ±Vᵀ S).
    """

    def __init__(self, elements: int, sign: int, width: int) -> None:
        self.sign = sign
        self.triangle = np.zeros((width, width), order="F")
        # pairs [W V] and [V ±W], so that the update is one product
        self._left = np.empty((elements, 2 * width), order="F")
        self._right = np.empty((elements, 2 * width), order="F")
        self._product = np.empty((elements, width), order="F")
        # half of the diagonal, which the transpose adds again, exactly
        below = np.tri(SMALLEST_BLOCK, k=-1) + (1 + sign) / 4 * np.eye(SMALLEST_BLOCK)
        self._below = np.asfortranarray(below)
        self._block = np.empty((SMALLEST_BLOCK, SMALLEST_BLOCK), order="F")

    def apply(self, panel: Floats, trailing: Floats) -> None:
        """Update `trailing`, shape (m, m), with the reflectors that stand in `panel`, shape (m, b)."""
        m = len(panel)
        k = min(panel.shape)
        reflectors, product = self._right[:m, :k], self._product[:m, :k]
        reflectors[...] = panel[:, :k]
        reflectors[:k] = np.tril(reflectors[:k], -1) + np.eye(k)
        triangle = np.triu(self.triangle[:k, :k])
        product[...] = 0
        self._multiply(trailing, reflectors, product)
        w = self._left[:m, :k]
        multiply_into(w, product, np.asfortranarray(triangle), keep=0.0)
        middle = np.empty((k, k), order="F")
        multiply_into(middle, reflectors, w, keep=0.0, transpose_left=True)
        multiply_into(w, reflectors, np.asfortranarray(triangle.T @ middle), scale=-0.5)
        self._left[:m, k : 2 * k] = reflectors
        np.multiply(w, self.sign, out=self._right[:m, k : 2 * k])
        self._subtract(trailing, self._left[:m, : 2 * k], self._right[:m, : 2 * k])

    def _multiply(self, s: Floats, v: Floats, product: Floats) -> None:
        """product += S V: halves of S, so that most of the work is in large products."""
        m = len(s)
        if m <= SMALLEST_BLOCK:
            block = self._block[:m, :m]
            below = s * self._below[:m, :m]
            np.multiply(below.T, self.sign, out=block)
            block += below
            multiply_into(product, block, v)
            return
        h = _half(m)
        self._multiply(s[:h, :h], v[:h], product[:h])
        self._multiply(s[h:, h:], v[h:], product[h:])
        multiply_into(product[h:], s[h:, :h], v[:h])
        multiply_into(product[:h], s[h:, :h], v[h:], scale=self.sign, transpose_left=True)

    def _subtract(self, s: Floats, left: Floats, right: Floats) -> None:
        """S −= left rightᵀ, on and below the diagonal."""
        m = len(s)
        if m <= SMALLEST_BLOCK:
            multiply_into(s, left, right, scale=-1.0, transpose_right=True)
            return
        h = _half(m)
        self._subtract(s[:h, :h], left[:h], right[:h])
        self._subtract(s[h:, h:], left[h:], right[h:])
        multiply_into(s[h:, :h], left[h:], right[:h], scale=-1.0, transpose_right=True)


def _half(m: int) -> int:
    """The largest SMALLEST_BLOCK · 2^k below m: all blocks but those at the end are then of the best size."""
    h = SMALLEST_BLOCK
    while 2 * h < m:
        h *= 2
    return h
