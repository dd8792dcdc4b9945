"""Laws of eigenvalues at infinite size, amplitude and all: s_r/n at rank r, each with source and standing."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from conetone.reference.exponents import Standing, null_direction_exponent
from conetone.reference.plane import PARTS, law_of_the_plane

Floats = NDArray[np.float64]

# A of s_r/n → A r^(−d/(2(d−1))) in flat diamonds, by part of C and dimension: the cone's indicator as
# integration along null rays, counted over the rays of the diamond. Derived here, not proved, rounded.
_NULL_DIRECTION = {("singular", 3): 0.2111, ("singular", 4): 0.0973, ("antisymmetric", 4): 0.0933}


@dataclass(frozen=True)
class AmplitudeLaw:
    """The law of s_r/n, r = 1, 2, … counted as `part` is ranked, at infinite size in a flat diamond.

    Where `amplitude` is a number, s_r/n = amplitude r^(−exponent); where it is None, the law is exact at
    every rank and no pure power. `standing` as in conetone.reference.exponents.
    """

    part: str
    exponent: float
    amplitude: float | None
    standing: Standing
    source: str

    def magnitudes(self, count: int) -> Floats:
        """s_r/n for r = 1 … count, falling, shape (count,), dimensionless."""
        if self.amplitude is None:
            return law_of_the_plane(self.part, count)
        return np.asarray(self.amplitude * np.arange(1.0, count + 1) ** -self.exponent)


def expected_amplitude(
    matrix: str, part: str, region: str | None, dimension: int | None
) -> AmplitudeLaw | None:
    """The law known for one part of one matrix in one region; None where none is.

    Exact in the two-dimensional diamond (conetone.reference.plane): of the positive part of i(C − Cᵀ) it is
    1/(2x), x among mπ and the positive roots of tan x = 2x, 1/(π r) to leading order. Heuristic in three and
    four dimensions, for singular values of C and the positive part of i(C − Cᵀ).
    """
    if matrix != "causal" or region != "diamond" or dimension is None:
        return None
    if dimension == 2 and part in PARTS:
        source = (
            "Pauli–Jordan spectrum, Johnston 2010; Afshordi et al. 2012"
            if part == "antisymmetric"
            else "C factorises in light-cone coordinates, derived in conetone.reference.plane"
        )
        return AmplitudeLaw(part, 1.0, None, "exact", source)
    amplitude = _NULL_DIRECTION.get((part, dimension))
    if amplitude is None:
        return None
    source = "fractional integration along null rays, constant integrated over the diamond"
    return AmplitudeLaw(part, null_direction_exponent(dimension), amplitude, "heuristic", source)
