"""Which dimension? That of an exponent, that of the ordering fraction, and whether one manifold has both."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import brentq
from scipy.special import digamma

from conetone.aggregate.curves import ExponentCurve
from conetone.errors import InputError
from conetone.fit.resample import jackknife_variance
from conetone.reference.flat import ordering_fraction_of_diamond

Floats = NDArray[np.float64]

# The ordering fraction falls from 1 at one dimension; in more dimensions than the largest no order of a size
# that can be stored has enough relations.
SMALLEST_DIMENSION, LARGEST_DIMENSION = 1.0, 20.0
# Further apart than this, in σ, spectrum and ordering fraction do not belong to one manifold.
LARGE_DISAGREEMENT = 3.0


@dataclass(frozen=True)
class SpectralDimension:
    """The dimension whose exponent, by `curve`, is this one; None where the curve has none.

    `low` and `high` end the interval of exponent ± its total error, carried through the curve, None where
    the curve does not reach; a value of None may still have one of them. `statistical` is the jackknife error
    of the inverted copies, `systematic_low` and `systematic_high` the distances to the dimensions of
    exponent ± systematic error. `sentence` says what a reader should know, or None.
    """

    value: float | None
    low: float | None
    high: float | None
    statistical: float | None
    systematic_low: float | None
    systematic_high: float | None
    exponent: float
    exponent_error: float
    curve: ExponentCurve
    sentence: str | None


@dataclass(frozen=True)
class OrderingDimension:
    """The dimension of a flat diamond with this ordering fraction, its standard error; why there is none."""

    value: float | None
    error: float | None
    sentence: str | None


@dataclass(frozen=True)
class Disagreement:
    """Spectral less Myrheim–Meyer dimension in σ, None where either is missing; a sentence if it is large."""

    deviation: float | None
    sentence: str | None


def spectral_dimension(
    exponent: float, statistical: float, systematic: float, copies: Sequence[Floats], curve: ExponentCurve
) -> SpectralDimension:
    """The dimension that has this exponent, with its interval.

    `copies`: for each size, the exponents without each of its replicates in turn; sizes are independent. The
    interval is that of exponent ± √(statistical² + systematic² + curve's own error²): a falling curve maps it
    with its coverage, however bent the curve is. Errors of the curve count as independent of the exponent's,
    which is cautious, as both come from the same method.
    """
    error = float(np.sqrt(statistical**2 + systematic**2 + curve.error_of(exponent) ** 2))
    value, downwards, upwards, low, high = _dimensions(
        curve, exponent + np.array([0, systematic, -systematic, error, -error])
    )
    return SpectralDimension(
        value,
        low,
        high,
        statistical=_jackknife_error(curve, copies) if value is not None else None,
        systematic_low=value - downwards if value is not None and downwards is not None else None,
        systematic_high=upwards - value if value is not None and upwards is not None else None,
        exponent=exponent,
        exponent_error=error,
        curve=curve,
        sentence=_sentence(value, high, exponent, curve),
    )


def _dimensions(curve: ExponentCurve, exponents: Floats) -> list[float | None]:
    return [found if np.isfinite(found) else None for found in curve.dimensions_of(exponents).tolist()]


def _jackknife_error(curve: ExponentCurve, copies: Sequence[Floats]) -> float | None:
    """None if a copy has no dimension."""
    variance = sum(
        float(jackknife_variance(curve.dimensions_of(of_size))) for of_size in copies if len(of_size) > 1
    )
    return float(np.sqrt(variance)) if np.isfinite(variance) else None


def _sentence(value: float | None, high: float | None, exponent: float, curve: ExponentCurve) -> str | None:
    if value is None:
        return f"no dimension has the exponent {exponent:.3g}: {curve.range}"
    if high is not None and high < 2:
        return f"the exponent {exponent:.3g} is above that of two dimensions"
    return None


def myrheim_meyer_dimension(ordering_fraction: float, error: float | None) -> OrderingDimension:
    """The real d at which a flat diamond has this ordering fraction, 2 χ₂(d) (Myrheim 1978, Meyer 1988).

    1/2 gives 2, 0.1 gives 4. `error`, the standard error of the fraction or None, is carried by the
    derivative: with f = Γ(d+1) Γ(d/2) / (2 Γ(3d/2)), f′/f = ψ(d+1) + ψ(d/2)/2 − 3 ψ(3d/2)/2. Raises
    InputError unless the fraction is one of pairs, from 0 to 1.
    """
    if not 0 <= ordering_fraction <= 1:
        raise InputError("ordering_fraction", str(ordering_fraction), "a number from 0 to 1")
    if ordering_fraction < ordering_fraction_of_diamond(LARGEST_DIMENSION):
        more = f"more than {LARGEST_DIMENSION:g} dimensions"
        return OrderingDimension(None, None, f"an ordering fraction of {ordering_fraction:.3g} means {more}")
    # rounding may put the fraction of one dimension on either side of 1
    chain = ordering_fraction > ordering_fraction_of_diamond(SMALLEST_DIMENSION) - 1e-14
    d = SMALLEST_DIMENSION if chain else _dimension_of_fraction(ordering_fraction)
    slope = ordering_fraction * float(digamma(d + 1) + digamma(d / 2) / 2 - 1.5 * digamma(1.5 * d))
    return OrderingDimension(d, error / abs(slope) if error is not None else None, None)


def _dimension_of_fraction(ordering_fraction: float) -> float:
    def excess(dimension: float) -> float:
        return ordering_fraction_of_diamond(dimension) - ordering_fraction

    return float(brentq(excess, SMALLEST_DIMENSION, LARGEST_DIMENSION, xtol=1e-13))


def disagreement(spectral: SpectralDimension, ordering: OrderingDimension) -> Disagreement:
    """How far the two dimensions are apart, in σ; positive if the spectrum has the larger one.

    Measured between exponents, where errors are nearly normal and every exponent counts, even one that no
    dimension has: (that of the Myrheim–Meyer dimension − measured) / both errors in quadrature. The errors
    are treated as independent, although both numbers come from the same orders.
    """
    if ordering.value is None or ordering.error is None:
        return Disagreement(None, None)
    curve = spectral.curve
    theirs = curve.exponent_of(ordering.value)
    error = float(np.hypot(spectral.exponent_error, curve.slope_of(ordering.value) * ordering.error))
    if not np.isfinite(theirs) or not error > 0:  # the curve ends before that dimension
        return Disagreement(None, None)
    deviation = (theirs - spectral.exponent) / error
    if abs(deviation) <= LARGE_DISAGREEMENT:
        return Disagreement(deviation, None)
    found = "none" if spectral.value is None else f"{spectral.value:.2f}"
    return Disagreement(
        deviation,
        f"not like a manifold of that dimension: {found} by {curve.name},"
        f" {ordering.value:.2f} by the ordering fraction, {abs(deviation):.1f} σ apart",
    )
