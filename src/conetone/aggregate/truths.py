"""Spectra whose exponent is known, to be injected: inside the set of fitted models, and outside of it.

A curve gives log λ at ranks 1, 2, … of one size, up to a constant, which no exponent depends on. What a truth
draws beside the exponent is drawn once for all sizes of an injection.
"""

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from functools import partial

import numpy as np
from numpy.typing import NDArray
from scipy.special import lambertw

from conetone.fit.models import KAPPA

Floats = NDArray[np.float64]
# log λ at ranks of one size.
Curve = Callable[[Floats, int], Floats]

# Standard deviation of a in a/r and in a/√r: a rank counted from 1/2 instead of 1 is a = ±α/2.
TOP_WIDTH, SLOW_TOP_WIDTH = 0.5, 0.1
# Mean and standard deviation of b in b r/n; derived in `fit/models.py`, 0 for α = 1 to 6.9 for α = 5/8.
KNEE_MEAN, KNEE_WIDTH = 3.0, 3.0
# A spectrum keeps falling: where a knee would flatten it to less than this share of its exponent, it goes on
# with that.
FLATTEST = 0.25
KNEE_POWERS = (0.6, 1.6)
SLOW_POWERS = (1 / 2, 1 / 3)
# Standard deviation of the exponent's shift at the smallest size, and the powers with which it goes.
DRIFT_WIDTH, DRIFT_POWERS = 0.05, (0.3, 1.4)
# Powers of the logarithm, with either sign. (log r)^q moves the local exponent by q/log r, nearly the same
# within a decade of ranks: no local slope, χ² or other window shows it.
LOGARITHM_POWERS = (0.005, 0.02)
# Spread of κ about its middle that the prior of its model knows, and what is far outside of that.
KAPPA_WIDTH, KAPPA_MOVED = 0.5, (2.0, 4.0)
# Spacing of radial numbers in units of that of angular ones.
RADIAL_SPACINGS = (1.0, 2.0)


@dataclass(frozen=True)
class Circumstances:
    """What truths take from the measured series.

    `sizes`, rising; `reach`, the upper end of the widest window over n, at the largest size; `steps`, for
    each size, the departure of its mean log λ from a smooth trend, shape (ranks,); `logarithm`, whether the
    models of the series hold one.
    """

    sizes: tuple[int, ...]
    reach: float
    steps: Mapping[int, Floats]
    logarithm: bool


@dataclass(frozen=True)
class Truth:
    """A kind of spectrum; `draw(generator, exponent, circumstances)` draws its other parameters.

    `inside`: whether one of the fitted models describes it. `about`: where exponents are drawn, None for
    about the measured one.
    """

    name: str
    meaning: str
    inside: bool
    draw: Callable[[np.random.Generator, float, Circumstances], Curve]
    about: float | None = None


def truths_for(*, logarithm: bool, dimension: int | None) -> Mapping[str, Truth]:
    """The truths for series whose models hold a logarithm, or for others, of a dimension or without one.

    Multiplets, those of rotations in four and five dimensions, go into series of four dimensions and more.
    """
    if logarithm:
        return LOGARITHM_TRUTHS
    rotations = dimension is not None and dimension >= 4
    return {name: truth for name, truth in POWER_TRUTHS.items() if truth.about is None or rotations}


def departure_from_trend(logs: Floats) -> Floats:
    """What is left of log λ at ranks 1, 2, … after its trend, shape (ranks,).

    The trend at a rank is the value there of the straight line in log r fitted to all ranks within a factor
    e, every stretch of log r with the same weight.
    """
    ranks = np.arange(1, len(logs) + 1)
    x, weight = np.log(ranks), 1 / ranks
    first = np.maximum(np.ceil(ranks / np.e - 1e-9).astype(int), 1) - 1
    stop = np.minimum(np.floor(ranks * np.e + 1e-9).astype(int), len(logs))

    def mean(values: Floats) -> Floats:
        sums = np.concatenate([[0.0], np.cumsum(weight * values)])
        return np.asarray(sums[stop] - sums[first])

    total = mean(np.ones_like(x))
    centre, level = mean(x) / total, mean(logs) / total
    variance = mean(x**2) / total - centre**2
    covariance = mean(x * logs) / total - centre * level
    slope = np.divide(covariance, variance, out=np.zeros_like(x), where=variance > 1e-12)
    return np.asarray(logs - level - slope * (x - centre))


def _signed(generator: np.random.Generator, low: float, high: float) -> float:
    return float(generator.uniform(low, high) * generator.choice((-1.0, 1.0)))


def _base(exponent: float, given: Circumstances, kappa: float = KAPPA) -> Curve:
    """The leading behaviour: r^−α, or r^−α W(r e^κ) where theory knows a logarithm."""

    def curve(ranks: Floats, size: int) -> Floats:
        logs = -exponent * np.log(ranks)
        return logs + np.log(lambertw(ranks * np.exp(kappa)).real) if given.logarithm else logs

    return curve


def _plus(base: Curve, correction: Curve) -> Curve:
    return lambda ranks, size: base(ranks, size) + correction(ranks, size)


def _top(coefficient: float, power: float) -> Curve:
    return lambda ranks, size: coefficient * ranks**-power


def _knee(exponent: float, coefficient: float, power: float) -> Curve:
    """b (r/n)^p until the local exponent α − b p (r/n)^p is down to its least share of α, then that slope."""

    def curve(ranks: Floats, size: int) -> Floats:
        share = ranks / size
        steepness = coefficient * power
        if steepness <= 0:
            return np.asarray(coefficient * share**power)
        most = (1 - FLATTEST) * exponent
        bend = (most / steepness) ** (1 / power)
        below = np.minimum(share, bend)
        return np.asarray(coefficient * below**power + most * np.log(share / below))

    return curve


def _draw_base(generator: np.random.Generator, exponent: float, given: Circumstances) -> Curve:
    kappa = generator.normal(KAPPA, KAPPA_WIDTH) if given.logarithm else KAPPA
    return _base(exponent, given, kappa)


def _draw_top(generator: np.random.Generator, exponent: float, given: Circumstances) -> Curve:
    return _plus(_draw_base(generator, exponent, given), _top(generator.normal(0, TOP_WIDTH), 1.0))


def _draw_knee(generator: np.random.Generator, exponent: float, given: Circumstances) -> Curve:
    base = _draw_base(generator, exponent, given)
    return _plus(base, _knee(exponent, generator.normal(KNEE_MEAN, KNEE_WIDTH), 1.0))


def _draw_top_and_knee(generator: np.random.Generator, exponent: float, given: Circumstances) -> Curve:
    with_top = _draw_top(generator, exponent, given)
    return _plus(with_top, _knee(exponent, generator.normal(KNEE_MEAN, KNEE_WIDTH), 1.0))


def _draw_moved_knee(generator: np.random.Generator, exponent: float, given: Circumstances) -> Curve:
    coefficient, power = generator.normal(KNEE_MEAN, KNEE_WIDTH), generator.uniform(*KNEE_POWERS)
    knee = _knee(exponent, coefficient * given.reach ** (1 - power), power)
    return _plus(_base(exponent, given), knee)


def _draw_drift(generator: np.random.Generator, exponent: float, given: Circumstances) -> Curve:
    shift, power = generator.normal(0, DRIFT_WIDTH), generator.uniform(*DRIFT_POWERS)
    smallest = given.sizes[0]
    return _plus(
        _base(exponent, given),
        lambda ranks, size: -shift * (size / smallest) ** -power * np.log(ranks),
    )


def _draw_logarithm(generator: np.random.Generator, exponent: float, given: Circumstances) -> Curve:
    power = _signed(generator, *LOGARITHM_POWERS)
    return _plus(_base(exponent, given), lambda ranks, size: power * np.log(np.log(ranks + np.e)))


def _draw_moved_kappa(generator: np.random.Generator, exponent: float, given: Circumstances) -> Curve:
    return _base(exponent, given, KAPPA + _signed(generator, *KAPPA_MOVED))


def _draw_slow_top(generator: np.random.Generator, exponent: float, given: Circumstances) -> Curve:
    coefficient, power = generator.normal(0, SLOW_TOP_WIDTH), float(generator.choice(SLOW_POWERS))
    return _plus(_base(exponent, given), _top(coefficient, power))


def _draw_measured_steps(generator: np.random.Generator, exponent: float, given: Circumstances) -> Curve:
    return _plus(_base(exponent, given), lambda ranks, size: given.steps[size][: len(ranks)])


def _draw_multiplets(
    generator: np.random.Generator, exponent: float, given: Circumstances, *, dimension: int
) -> Curve:
    spacing = float(generator.uniform(*RADIAL_SPACINGS))
    return lambda ranks, size: (
        -exponent * (dimension - 1) * np.log(multiplet_levels(len(ranks), dimension, spacing))
    )


def multiplet_levels(count: int, dimension: int, spacing: float) -> Floats:
    """The first `count` levels x = l + c k + φ of a separable problem, rising, with their degeneracies.

    l, k = 0, 1, …; c is `spacing`. Rotations make a level 2l + 1 fold in `dimension` 4 and (l + 1)² fold in
    5, so that the levels up to x number x³/3c and x⁴/12c: eigenvalues x^−α(d−1) fall as rank^−α exactly. In
    the smooth part of that count (Euler–Maclaurin in both sums) the next power, of relative order 1/x,
    vanishes for φ = (1 + c)/2 and φ = 1 + c/2, which are taken: what remains beside steps falls as
    rank^−2/(d−1) (derived here).
    """
    offset = {4: (1 + spacing) / 2, 5: 1 + spacing / 2}[dimension]
    volume = {4: 3 * spacing, 5: 12 * spacing}[dimension]
    # the steps are smaller than the level itself: a few levels more than the smooth count asks for
    highest = (volume * count) ** (1 / (dimension - 1)) + 3
    angular = np.arange(int(highest) + 1)
    radial = np.arange(int(highest / spacing) + 1)
    levels = angular[:, np.newaxis] + spacing * radial + offset
    degeneracy = 2 * angular + 1 if dimension == 4 else (angular + 1) ** 2
    copies = np.broadcast_to(degeneracy[:, np.newaxis], levels.shape)
    inside = levels <= highest + offset
    found = np.sort(np.repeat(levels[inside], copies[inside]))
    assert len(found) >= count
    return found[:count]


def _catalogue(*truths: Truth) -> Mapping[str, Truth]:
    return {truth.name: truth for truth in truths}


_OUTSIDE_ALWAYS = (
    Truth("knee-moved", "b (r/n)^p with p from 0.6 to 1.6", False, _draw_moved_knee),
    Truth("drift", "an exponent that moves with size as n^−w, w from 0.3 to 1.4", False, _draw_drift),
    Truth("slow-top", "a r^−1/2 or a r^−1/3", False, _draw_slow_top),
    Truth("measured-steps", "the steps of the measured spectrum itself", False, _draw_measured_steps),
)
POWER_TRUTHS = _catalogue(
    Truth("power", "r^−α", True, _draw_base),
    Truth("top", "a/r", True, _draw_top),
    Truth("knee", "b r/n, as long as the spectrum falls", True, _draw_knee),
    Truth("top-and-knee", "both", True, _draw_top_and_knee),
    *_OUTSIDE_ALWAYS,
    Truth("logarithm", "(log r)^q, |q| from 0.005 to 0.02", False, _draw_logarithm),
    # with the exponents of their dimension: steeper spectra make larger steps of the same multiplets
    Truth("multiplets-4", "degenerate as in d = 4", False, partial(_draw_multiplets, dimension=4), 2 / 3),
    Truth("multiplets-5", "degenerate as in d = 5", False, partial(_draw_multiplets, dimension=5), 5 / 8),
)
# The logarithm being absent is no truth here: theory says that the series has one.
LOGARITHM_TRUTHS = _catalogue(
    Truth("logarithm", "r^−α W(r e^κ)", True, _draw_base),
    Truth("logarithm-and-knee", "the same with b r/n", True, _draw_knee),
    *_OUTSIDE_ALWAYS,
    Truth("top", "a/r", False, _draw_top),
    Truth("kappa-moved", "κ moved by 2 to 4, either way", False, _draw_moved_kappa),
)
