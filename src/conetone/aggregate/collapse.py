"""Do curves of several sizes fall onto one? The quality S of a data collapse (Houdayer & Hartmann 2004)."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from conetone.errors import InputError
from conetone.fit.profile import Profile

Floats = NDArray[np.float64]

# A quality found from fewer of the points says nothing: any curves agree where they hardly overlap.
SMALLEST_SHARE = 0.5


@dataclass(frozen=True)
class Curve:
    """Points of one size: `x` rising, `y` ± `error`, standard errors above 0, independent; shape (points,).

    Raises InputError if they are not.
    """

    x: Floats
    y: Floats
    error: Floats

    def __post_init__(self) -> None:
        arrays = (self.x, self.y, self.error)
        if self.x.ndim != 1 or len({array.shape for array in arrays}) > 1:
            found = " and ".join(str(array.shape) for array in arrays)
            raise InputError("curve: x, y and error", f"shapes {found}", "one shape (points,)")
        if not all(np.isfinite(array).all() for array in arrays):
            raise InputError("curve", "a number that is not finite", "finite numbers")
        if (np.diff(self.x) <= 0).any():
            raise InputError("curve: x", str(self.x.tolist()), "rising numbers")
        if (self.error <= 0).any():
            found, allowed = f"{self.error.min():.2g}", "errors above 0"
            raise InputError(
                "curve: error", found, allowed, "exactly regular orders have no errors to judge by"
            )
        for array in arrays:
            array.setflags(write=False)


@dataclass(frozen=True)
class Collapse:
    """Quality S of the collapse against rank/n^p for each power p; NaN where too few points overlap.

    `power` has the lowest S, and (`lowest`, `highest`) is where S < S_min + 1 around it, −∞ or ∞ where that
    reaches the end of the grid. All are NaN if no power has a quality.
    """

    powers: Floats
    quality: Floats
    power: float
    lowest: float
    highest: float


def slope_curve(profile: Profile) -> Curve:
    """Local slope of a spectrum, −d log λ / d log rank, against rank; the last bin has none."""
    return Curve(profile.slope_rank[:-1].copy(), profile.slope[:-1].copy(), profile.slope_error[:-1].copy())


def collapse_quality(curves: Sequence[Curve]) -> float:
    """S = mean of (y − Y)²/(dy² + dY²) over points of curves already scaled; near 1 if they collapse.

    Y ± dY is, at the x of the point, the weighted straight line through the neighbours on both sides that
    every other curve has there (Phys. Rev. B 70, 014418, appendix). Points beyond all other curves do not
    count; NaN if none is left.
    """
    terms = _terms(curves)
    return float(terms.mean()) if terms.size else np.nan


def best_collapse(profiles: Mapping[int, Curve], powers: Floats) -> Collapse:
    """Collapse curves of rank, by size n, against rank/n^p for every p of a rising grid of powers.

    Neighbours are joined in log rank, in which local slopes are smooth. Raises InputError for fewer than two
    sizes, ranks that are not positive, or powers that do not rise.
    """
    if len(profiles) < 2 or any(n < 1 for n in profiles):
        raise InputError("collapse: sizes", str(sorted(profiles)), "at least two, each at least 1")
    if any((curve.x <= 0).any() for curve in profiles.values()):
        raise InputError("collapse: ranks", "a rank that is not positive", "positive ranks")
    if powers.ndim != 1 or not powers.size or not (np.diff(powers) > 0).all():
        raise InputError("collapse: powers", str(powers.tolist()), "rising numbers")
    points = sum(len(curve.x) for curve in profiles.values())
    quality = np.full(len(powers), np.nan)
    for i, power in enumerate(powers):
        scaled = [Curve(np.log(c.x) - power * np.log(n), c.y, c.error) for n, c in profiles.items()]
        terms = _terms(scaled)
        if terms.size >= SMALLEST_SHARE * points:
            quality[i] = terms.mean()
    if np.isnan(quality).all():
        return Collapse(powers, quality, np.nan, np.nan, np.nan)
    best = int(np.nanargmin(quality))
    level = quality[best] + 1
    return Collapse(
        powers=powers,
        quality=quality,
        power=float(powers[best]),
        lowest=_crossing(powers[best::-1], quality[best::-1], level, -np.inf),
        highest=_crossing(powers[best:], quality[best:], level, np.inf),
    )


def _terms(curves: Sequence[Curve]) -> Floats:
    """(y − Y)²/(dy² + dY²) of every point that has neighbours in other curves."""
    return np.concatenate([np.empty(0), *(_terms_of(curves, i) for i in range(len(curves)))])


def _terms_of(curves: Sequence[Curve], own: int) -> Floats:
    x = curves[own].x
    # sums Σ w, Σ w x, Σ w x², Σ w y, Σ w x y with x counted from each point, so that Y is the intercept
    w, wx, wxx, wy, wxy = np.zeros((5, len(x)))
    for other in (curve for i, curve in enumerate(curves) if i != own and len(curve.x) > 1):
        left = np.clip(np.searchsorted(other.x, x, side="right") - 1, 0, len(other.x) - 2)
        inside = (other.x[0] <= x) & (x <= other.x[-1])
        for neighbour in (left, left + 1):
            weight = np.where(inside, other.error[neighbour] ** -2, 0)
            distance = other.x[neighbour] - x
            w += weight
            wx += weight * distance
            wxx += weight * distance**2
            wy += weight * other.y[neighbour]
            wxy += weight * distance * other.y[neighbour]
    counted = w > 0
    w, wx, wxx, wy, wxy = (total[counted] for total in (w, wx, wxx, wy, wxy))
    determinant = w * wxx - wx**2
    line, line_variance = (wxx * wy - wx * wxy) / determinant, wxx / determinant
    variance = curves[own].error[counted] ** 2 + line_variance
    return np.asarray((curves[own].y[counted] - line) ** 2 / variance)


def _crossing(powers: Floats, quality: Floats, level: float, beyond: float) -> float:
    """Where quality, from its minimum on, first reaches a level; `beyond` if it does not or is NaN before."""
    for i in range(1, len(powers)):
        if np.isnan(quality[i]):
            return beyond
        if quality[i] >= level:
            share = (level - quality[i - 1]) / (quality[i] - quality[i - 1])
            return float(powers[i - 1] + share * (powers[i] - powers[i - 1]))
    return beyond
