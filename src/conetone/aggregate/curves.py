"""Exponents as a falling curve of the dimension: the expected one, and one measured on known dimensions."""

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import Protocol

import numpy as np
from numpy.typing import NDArray
from scipy.interpolate import PchipInterpolator

from conetone.errors import InputError
from conetone.reference.exponents import null_direction_exponent

Floats = NDArray[np.float64]

# Halvings that take any range of 1/(d − 1) below rounding.
_HALVINGS = 52
# Step of numerical derivatives, as a share of the smallest distance between exponents.
_STEP = 1e-6


class ExponentCurve(Protocol):
    """A curve of exponents that falls with the dimension. `name` says in a sentence by what."""

    @property
    def name(self) -> str:
        """Such as `the measured exponents`."""

    @property
    def range(self) -> str:
        """The exponents that have a dimension, in words."""

    def dimensions_of(self, exponents: Floats) -> Floats:
        """The dimension of each exponent, NaN where the curve has none."""

    def exponent_of(self, dimension: float) -> float:
        """The exponent of a dimension, NaN where the curve has none."""

    def slope_of(self, dimension: float) -> float:
        """Its derivative by the dimension, NaN where the curve has none."""

    def error_of(self, exponent: float) -> float:
        """Standard error of the curve, in exponents, where it has this one or comes nearest to it."""


@dataclass(frozen=True)
class ExpectedCurve:
    """α = d/(2(d − 1)), heuristic; its inverse, d = 2α/(2α − 1), exists for α > 1/2, with d < 2 above 1."""

    @property
    def name(self) -> str:
        """Label with its standing."""
        return "the expected exponents (heuristic)"

    @property
    def range(self) -> str:
        """The exponents that have a dimension."""
        return "the expected ones (heuristic) all lie above 1/2"

    def dimensions_of(self, exponents: Floats) -> Floats:
        """2α/(2α − 1), NaN from 1/2 downwards."""
        beyond = 2 * exponents - 1
        return np.divide(2 * exponents, beyond, out=np.full_like(beyond, np.nan), where=beyond > 0)

    def exponent_of(self, dimension: float) -> float:
        """d/(2(d − 1)), NaN from one dimension downwards."""
        return null_direction_exponent(dimension) if dimension > 1 else np.nan

    def slope_of(self, dimension: float) -> float:
        """−1/(2(d − 1)²), NaN from one dimension downwards."""
        return -0.5 / (dimension - 1) ** 2 if dimension > 1 else np.nan

    def error_of(self, exponent: float) -> float:
        """None is known: 0."""
        return 0.0


@dataclass(frozen=True)
class MeasuredCurve:
    """Exponents of other series of the same operator, whose dimensions are known, and what lies between them.

    Monotone cubics (PCHIP; Fritsch & Carlson 1980) of the exponent in 1/(d − 1), in which the expected curve
    is a straight line, so that between whole dimensions nothing is lost to interpolation if that curve holds.
    `errors` are standard errors of the exponents, independent of each other. A series that is asked about
    must not be one of the nodes: it would find its own dimension whatever its exponent. Raises InputError
    unless dimensions, above 1, rise, exponents fall, and there are at least two.
    """

    dimensions: tuple[float, ...]
    exponents: tuple[float, ...]
    errors: tuple[float, ...]

    def __post_init__(self) -> None:
        count = len(self.dimensions)
        if count < 2 or len(self.exponents) != count or len(self.errors) != count:
            raise InputError(
                "curve", f"{count} dimensions", "two or more, with an exponent and an error each"
            )
        if not (self.dimensions[0] > 1 and (np.diff(self.dimensions) > 0).all()):
            raise InputError("dimensions", str(self.dimensions), "rising numbers above 1")
        if not (np.diff(self.exponents) < 0).all():
            raise InputError("exponents", str(self.exponents), "falling numbers")
        if not all(error >= 0 for error in self.errors):
            raise InputError("errors", str(self.errors), "numbers of at least 0")

    @classmethod
    def through(
        cls, dimensions: Sequence[float], exponents: Sequence[float], errors: Sequence[float]
    ) -> "MeasuredCurve | None":
        """The curve up to the dimension from which exponents fall no further; None without two nodes."""
        nodes = sorted(zip(dimensions, exponents, errors, strict=True))
        falling = nodes[:1]
        for node in nodes[1:]:
            if not (node[0] > falling[-1][0] and node[1] < falling[-1][1]):
                break
            falling.append(node)
        if len(falling) < 2:
            return None
        return cls(*(tuple(float(x) for x in column) for column in zip(*falling, strict=True)))

    @property
    def name(self) -> str:
        """Label."""
        return "the measured exponents"

    @property
    def range(self) -> str:
        """The exponents that have a dimension."""
        ends = f"{self.exponents[-1]:.3g} at d = {self.dimensions[-1]:g} to {self.exponents[0]:.3g} at d = "
        return f"the measured ones run from {ends}{self.dimensions[0]:g}"

    def dimensions_of(self, exponents: Floats) -> Floats:
        """Of each exponent, by halving; NaN beyond the nodes."""
        inside = (exponents >= self.exponents[-1]) & (exponents <= self.exponents[0])
        return np.where(inside, 1 + 1 / self._abscissa_of(exponents), np.nan)

    def exponent_of(self, dimension: float) -> float:
        """Interpolated; NaN beyond the nodes."""
        return float(self._curve(1 / (dimension - 1))) if self._reaches(dimension) else np.nan

    def slope_of(self, dimension: float) -> float:
        """Derivative of the interpolation; NaN beyond the nodes."""
        if not self._reaches(dimension):
            return np.nan
        x = 1 / (dimension - 1)
        return float(-self._curve(x, 1) * x**2)

    def error_of(self, exponent: float) -> float:
        """√Σ (∂α/∂α_j σ_j)² over the nodes j."""
        x = self._abscissa_of(np.array([exponent]))[0]
        step = _STEP * -np.diff(self.exponents).max()
        moved = [self._through(self._nodes + step * unit)(x) for unit in np.eye(len(self._nodes))]
        shares = (np.array(moved) - self._curve(x)) / step
        return float(np.sqrt(((shares * self.errors[::-1]) ** 2).sum()))

    def _reaches(self, dimension: float) -> bool:
        return self.dimensions[0] <= dimension <= self.dimensions[-1]

    @cached_property
    def _abscissae(self) -> Floats:
        return 1 / (np.array(self.dimensions[::-1]) - 1)

    @cached_property
    def _nodes(self) -> Floats:
        return np.array(self.exponents[::-1])

    @cached_property
    def _curve(self) -> PchipInterpolator:
        return self._through(self._nodes)

    def _through(self, exponents: Floats) -> PchipInterpolator:
        return PchipInterpolator(self._abscissae, exponents)

    def _abscissa_of(self, exponents: Floats) -> Floats:
        """1/(d − 1) of each exponent, the nearest end beyond the nodes."""
        low = np.full(exponents.shape, self._abscissae[0])
        high = np.full(exponents.shape, self._abscissae[-1])
        for _ in range(_HALVINGS):
            middle = (low + high) / 2
            below = self._curve(middle) < exponents
            low, high = np.where(below, middle, low), np.where(below, high, middle)
        return np.asarray((low + high) / 2)
