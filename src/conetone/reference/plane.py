"""Exact spectra of the causal matrix C of the flat diamond in two dimensions, at infinite size.

Light-cone coordinates make the diamond the unit square, and C the kernel θ(u' − u) θ(v' − v): as an
operator C/n → V ⊗ V, V the integration (Vf)(u) = ∫_u^1 f. Eigenvalues and singular values of sprinklings,
over n, converge to those of the integral operator (Koltchinskii & Giné 2000, Bernoulli 6, 113). Below p and q
are odd and positive, and d(m) is the number of divisors of m.

- **Singular values.** Those of V are 2/(π p), so that those of C/n are 4/(π² p q): m = p q comes d(m) times.
  Derived here.
- **C + Cᵀ.** V = P + S with P = (V + Vᵀ)/2, of which only the eigenvalue 1/2 of the constant is not zero,
  and S = (V − Vᵀ)/2, with eigenvalues ±i/(π p) and eigenfunctions e^(∓iπpu). So C + Cᵀ → 2 (S ⊗ S + P ⊗ P),
  and 2 S ⊗ S has the eigenvalues ±2/(π² m), each sign 2 d(m) times. The perturbation of rank one, 1/2 on the
  constant, moves one of those 2 d(m): the constant has the square overlap 32/(π⁴ p² q²) with the
  eigenfunctions of (p, q) of either sign. With λ/n = ±2/(π² x) the secular equation is
  (16 x/π²) Σ 1/(p² q² − x²) = ±1, whose sum over q is known:

      Σ_p tan(π x/2p) / p = π/4 for positive, −π/4 for negative λ.

  The left side rises from pole to pole, at odd x. So positive eigenvalues have x = m, 2 d(m) − 1 times, and
  one root in each of (0, 1), (1, 3), (3, 5), …; negative ones the same without a root in (0, 1). Derived
  here.
- **i(C − Cᵀ).** ±1/(2x), x ∈ {mπ} ∪ {x > 0: tan x = 2x} (Johnston 2010; Afshordi, Buck, Dowker, Rideout,
  Sorkin & Yazdi 2012).
"""

from math import log, pi

import numpy as np
from numpy.typing import NDArray
from scipy.special import zeta

Floats = NDArray[np.float64]

PARTS = ("symmetric", "symmetric-positive", "symmetric-negative", "antisymmetric", "singular")
# Parts whose law holds a logarithm: their ranks count products p q, as Dirichlet's divisor problem does.
WITH_LOGARITHM = frozenset(PARTS) - {"antisymmetric"}

_EULER = float(np.euler_gamma)
# Bisection of an interval of length 2 to below 1e-14, and the terms of tan z for |z| ≤ π/4 to rounding.
_HALVINGS, _TAN_TERMS = 48, 28
# tan x = 2x is iterated as x = mπ + arctan 2x, which gains half a digit a step where it is slowest.
_STEPS = 80


def law_of_the_plane(part: str, count: int) -> Floats:
    """The `count` largest magnitudes over n, falling, shape (count,), of one part of C: see above.

    Of part symmetric both signs together. Takes about count² steps for the symmetric parts. Raises ValueError
    for another part or a count below 1.
    """
    _check(part)
    if count < 1:
        raise ValueError(f"a law of {count} eigenvalues")
    if part == "antisymmetric":
        return _by_pairs(count)
    if part == "singular":
        return 4 / (pi**2 * _odd_products(count)[:count])
    signs = {"symmetric-positive": (1,), "symmetric-negative": (-1,), "symmetric": (1, -1)}[part]
    x = np.concatenate([_inverse_eigenvalues(sign, count // (2 * len(signs)) + 1) for sign in signs])
    return np.asarray(2 / (pi**2 * np.sort(x)[:count]))


def number_above(part: str, magnitude: float) -> float:
    """About how many magnitudes over n lie above a small one, from the mean law of divisors.

    Of singular values x ln x + (2γ + 4 ln 2 − 1) x with x = 1/(π² s): the sum of d(m) over odd m up to 4x. Of
    each sign of C + Cᵀ x ln x + (2γ + 3 ln 2 − 1) x with x = 1/(π² λ), and of the positive part of i(C − Cᵀ)
    1/(πλ). Raises ValueError for another part.
    """
    _check(part)
    if part == "antisymmetric":
        return 1 / (pi * magnitude)
    x = 1 / (pi**2 * magnitude)
    if part == "singular":
        return x * log(x) + (2 * _EULER + 4 * log(2) - 1) * x
    both = 2 if part == "symmetric" else 1
    return both * (x * log(x) + (2 * _EULER + 3 * log(2) - 1) * x)


def _check(part: str) -> None:
    if part not in PARTS:
        raise ValueError(f"no law of part {part}; known are {', '.join(PARTS)}")


def _by_pairs(count: int) -> Floats:
    m = np.arange(count)
    x = np.full(count, pi / 2) + m * pi
    for _ in range(_STEPS):
        x = m * pi + np.arctan(2 * x)
    return np.asarray(1 / (2 * np.sort(np.concatenate([x, m[1:] * pi]))[:count]))


def _odd_products(count: int) -> Floats:
    """Products p q of odd numbers, each pair (p, q) once, rising: all up to some limit, at least `count`."""
    limit = 1
    while sum((limit // p + 1) // 2 for p in range(1, limit + 1, 2)) < count:
        limit = limit * 5 // 4 + 2
    rows = [p * np.arange(1, limit // p + 1, 2) for p in range(1, limit + 1, 2)]
    return np.sort(np.concatenate(rows)).astype(np.float64)


def _inverse_eigenvalues(sign: int, pairs: int) -> Floats:
    """The x of one sign of C + Cᵀ, at least 2 `pairs` − 1 of them, none below the largest missing."""
    products, divisors = np.unique(_odd_products(pairs), return_counts=True)
    fixed = np.repeat(products, 2 * divisors - 1)
    # every odd number is a pole
    above = products if sign > 0 else products[1:]
    return np.concatenate([fixed, _roots(np.maximum(above - 2, 0), above, sign * pi / 4)])


def _roots(low: Floats, high: Floats, level: float) -> Floats:
    """Where Σ_p tan(π x/2p)/p takes this level, one root in each interval, by bisection."""
    for _ in range(_HALVINGS):
        middle = (low + high) / 2
        below = _sum_of_tangents(middle) < level
        low, high = np.where(below, middle, low), np.where(below, high, middle)
    return np.asarray((low + high) / 2)


def _sum_of_tangents(x: Floats) -> Floats:
    """Σ over odd p of tan(π x/2p)/p: term by term up to 2 max x, beyond by the power series of tan.

    tan z = Σ_k 2 (4^k − 1) ζ(2k) z^(2k−1) / π^(2k), and Σ p^(−2k) from there on is a Hurwitz zeta function.
    """
    last = 2 * int(np.ceil(x.max(initial=1.0))) + 1
    total = np.zeros_like(x)
    for p in range(1, last, 2):
        total += np.tan(pi * x / (2 * p)) / p
    for k in range(1, _TAN_TERMS + 1):
        coefficient = 2 * (4.0**k - 1) * zeta(2 * k) / pi * (1 / 2) ** (2 * k - 1)
        total += coefficient * (x / 2) ** (2 * k - 1) * zeta(2 * k, last / 2) / 2
    return total
