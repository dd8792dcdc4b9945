"""Products with a matrix that is never written down."""

from typing import Protocol

import numpy as np
from numpy.typing import NDArray


class Product(Protocol):
    """A real matrix M of shape (n, n) and its transpose, applied to many vectors at once.

    The result does not depend on the number of threads.
    """

    @property
    def elements(self) -> int:
        """The n of M."""
        ...

    @property
    def threads(self) -> int:
        """Threads that share one application."""
        ...

    def apply(self, block: NDArray[np.float64], /) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        """M X and Mᵀ X of X of shape (n, k), both of that shape."""
        ...


class Doubled:
    """N = [[0, M], [0, 0]] of a matrix M of shape (n, n).

    The eigenvalues of N + Nᵀ are ±s for the singular values s of M. Attributes: `elements`, 2n; `threads`,
    those of M.
    """

    def __init__(self, product: Product) -> None:
        self._product = product
        self.elements = 2 * product.elements
        self.threads = product.threads

    def apply(self, block: NDArray[np.float64]) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        """N X and Nᵀ X of X of shape (2n, k): (M X₂, 0) and (0, Mᵀ X₁) of its halves."""
        n, k = self._product.elements, block.shape[1]
        forward, backward = np.zeros_like(block), np.zeros_like(block)
        # one application gives M and Mᵀ of the same vectors, of which one half each is of use
        up, down = self._product.apply(np.ascontiguousarray(np.concatenate([block[n:], block[:n]], axis=1)))
        forward[:n], backward[n:] = up[:, :k], down[:, k:]
        return forward, backward
