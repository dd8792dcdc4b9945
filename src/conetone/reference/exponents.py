"""Exponents that theory expects for spectra of sprinklings, each with its standing.

Standing is `exact` (proved), `published` or `heuristic`; a heuristic value is for comparison, never for
calibration, and is labelled wherever it is shown.
"""

from dataclasses import dataclass
from typing import Literal

from conetone.reference.plane import WITH_LOGARITHM

Standing = Literal["exact", "published", "heuristic"]


@dataclass(frozen=True)
class ExpectedExponent:
    """An expected exponent α of |λ_r| ∝ r^(−α), with its source and standing.

    `logarithm` says that the law is a power times a logarithm; `caveat` says it to a reader.
    """

    value: float
    standing: Standing
    source: str
    logarithm: bool = False
    caveat: str | None = None


LOGARITHM = "the law of this part in two dimensions holds a logarithm, as its models do by default"


def null_direction_exponent(dimension: float) -> float:
    """d / (2 (d − 1)): the cone's indicator acts along a null ray as integration of order d/2."""
    return dimension / (2 * (dimension - 1))


def holds_logarithm(matrix: str, part: str, dimension: int | None) -> bool:
    """Whether ranks count as x ln x does, not as a power of x = 1/λ.

    In light-cone coordinates the kernel of C factorises, and products of two 1/k laws are counted (see
    conetone.reference.plane). Proved for the diamond; for other regions of the plane a heuristic, from the
    same symbol 1/(ξη). That of i(C − Cᵀ) vanishes but on null covectors, and with it the logarithm.
    """
    return matrix == "causal" and dimension == 2 and part in WITH_LOGARITHM


def expected_exponent(
    matrix: str, part: str, region: str | None, dimension: int | None
) -> ExpectedExponent | None:
    """The exponent expected for one part of one matrix in one region; None where nothing is known.

    Exact are the spectra of the two-dimensional diamond, conetone.reference.plane: of i(C − Cᵀ) the
    Pauli–Jordan spectrum, λ_r → n/(π r) (Johnston 2010; Afshordi, Buck, Dowker, Rideout, Sorkin & Yazdi
    2012).
    """
    if matrix != "causal" or region is None or dimension is None:
        return None
    logarithm = holds_logarithm(matrix, part, dimension)
    exact = (region, dimension) == ("diamond", 2)
    if exact and not logarithm:
        return ExpectedExponent(1.0, "exact", "Pauli–Jordan spectrum, Johnston 2010; Afshordi et al. 2012")
    return ExpectedExponent(
        null_direction_exponent(dimension),
        "exact" if exact else "heuristic",
        "C factorises in light-cone coordinates, derived in conetone.reference.plane"
        if exact
        else "d/(2(d−1)), fractional integration along null rays",
        logarithm,
        LOGARITHM if logarithm else None,
    )
