"""Exponents that theory expects for spectra of sprinklings, each with its standing.

Standing is `exact` (proved), `published` or `heuristic`; a heuristic value is for comparison, never for
calibration, and is labelled wherever it is shown.
"""

from dataclasses import dataclass
from typing import Literal

Standing = Literal["exact", "published", "heuristic"]


@dataclass(frozen=True)
class ExpectedExponent:
    """An expected exponent α of |λ_r| ∝ r^(−α), with its source and standing.

    `caveat` says how the law departs from a pure power, where it is known to.
    """

    value: float
    standing: Standing
    source: str
    caveat: str | None = None


# The kernel of C + Cᵀ factorises in light-cone coordinates; products of two 1/k laws count as x log x does.
LOGARITHM = (
    "the law of the symmetric part in two dimensions holds a logarithm: slopes lie below 1 at any size"
)


def null_direction_exponent(dimension: float) -> float:
    """d / (2 (d − 1)): the cone's indicator acts along a null ray as integration of order d/2."""
    return dimension / (2 * (dimension - 1))


def expected_exponent(
    matrix: str, part: str, region: str | None, dimension: int | None
) -> ExpectedExponent | None:
    """The exponent expected for one part of one matrix in one region; None where nothing is known.

    Source of the exact case: the Pauli–Jordan spectrum of the two-dimensional diamond, λ_r → n/(π r)
    (Johnston 2010; Afshordi, Buck, Dowker, Rideout, Sorkin & Yazdi 2012).
    """
    if matrix != "causal" or region is None or dimension is None:
        return None
    if (region, dimension, part) == ("diamond", 2, "antisymmetric"):
        return ExpectedExponent(1.0, "exact", "Pauli–Jordan spectrum, Johnston 2010; Afshordi et al. 2012")
    return ExpectedExponent(
        null_direction_exponent(dimension),
        "heuristic",
        "d/(2(d−1)), fractional integration along null rays",
        LOGARITHM if (dimension, part) == (2, "symmetric") else None,
    )
