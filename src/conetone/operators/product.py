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
