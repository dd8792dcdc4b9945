"""Which eigenvalues are ranked."""

import numpy as np
from numpy.typing import NDArray

from conetone.operators.catalogue import Part

Floats = NDArray[np.float64]


def ranked_magnitudes(
    eigenvalues: Floats, part: Part, *, count: int | None = None, tolerance: float = 0.0
) -> Floats:
    """Magnitudes in falling order, rank 1 first.

    Of an antisymmetric part, whose spectrum is ±, the positive eigenvalues; of a symmetric part all
    magnitudes, or those of one sign; of singular values all. Values that are zero to rounding, below n ε
    times the largest magnitude of either sign, or not above `tolerance` times that, are left out.

    With `count`, the eigenvalues are only the `count` largest of each sign. Magnitudes are then ranked as far
    as none can be missing: `count` of one sign; of both down to the smallest of a sign that has `count` of
    them.
    """
    positive = np.sort(eigenvalues[eigenvalues > 0])[::-1]
    negative = np.sort(-eigenvalues[eigenvalues < 0])[::-1]
    if part == "symmetric-negative":
        magnitudes = negative[:count]
    elif part != "symmetric":
        magnitudes = positive[:count]
    else:
        complete = max(_smallest_known(positive, count), _smallest_known(negative, count))
        magnitudes = np.sort(np.concatenate([positive, negative]))[::-1]
        magnitudes = magnitudes[magnitudes >= complete]
    largest = float(np.abs(eigenvalues).max(initial=0.0))
    level = max(len(eigenvalues) * np.finfo(np.float64).eps, tolerance) * largest
    return np.asarray(magnitudes[magnitudes > level])


def _smallest_known(falling: Floats, count: int | None) -> float:
    """Down to where one sign is complete: of a sign with fewer than `count` values there are no others."""
    return 0.0 if count is None or len(falling) < count else float(falling[count - 1])
