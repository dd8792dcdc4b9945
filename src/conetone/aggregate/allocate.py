"""How many replicates each size takes: a total error at least cost, or the smallest error within a budget.

Sizes are independent samples, so the variance of an exponent is a sum over sizes of b_i/m_i, with m_i
replicates of size i and b_i = g_i² σ_i²: g_i the gain of the whole chain, σ_i the scatter of one replicate.
Both problems are convex. One series without floors has m_i ∝ √(b_i/c_i), c_i the cost of a replicate (Neyman
allocation with costs: Cochran, Sampling Techniques, 3rd ed. 1977, §5.5; from memory). Gains and systematic
errors are taken as the pilot found them.
"""

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import brentq, minimize

Floats = NDArray[np.float64]
Counts = NDArray[np.int64]

# A bin of m replicates is weighted by 1/s², in the mean too large by (m − 1)/(m − 3) (normal logs): 1.4 at 8,
# without bound at 3. At 8 the part of one size in the error is itself known to 1/√(2(m − 1)), 27 %.
SMALLEST_FLOOR = 8
# e-folds of variance beyond the largest systematic error; where so many are too few, it has no variance.
MOST_FOLDS = 60.0
# Whole numbers within rounding of the optimum are not rounded up.
ROUNDING = 1e-6


@dataclass(frozen=True)
class Design:
    """What is known before replicates are chosen.

    `variance` b and its `log_error`, (series, sizes); `systematic` (series,); `cost` of a replicate in core
    seconds and `floors`, the fewest replicates allowed, (sizes,). Raises ValueError if one of these is zero.
    """

    variance: Floats
    log_error: Floats
    systematic: Floats
    cost: Floats
    floors: Counts

    def __post_init__(self) -> None:
        """Check what the mathematics needs."""
        if not ((self.cost > 0).all() and (self.floors > 0).all()):
            raise ValueError("every size has a cost and a floor above zero")

    def statistical(self, replicates: Floats | Counts) -> Floats:
        """Predicted statistical errors, (series,)."""
        return np.asarray(np.sqrt((self.variance / replicates).sum(axis=-1)))


@dataclass(frozen=True)
class Allocation:
    """Whole replicates for each size and what they are predicted to reach.

    `reachable`, (series,), marks the series that they are chosen for.
    """

    design: Design
    replicates: Counts
    reachable: NDArray[np.bool_]

    @property
    def cost(self) -> float:
        """Seconds of one core, the pilot's replicates included."""
        return float(self.design.cost @ self.replicates)

    @cached_property
    def statistical(self) -> Floats:
        """Predicted statistical errors, (series,)."""
        return self.design.statistical(self.replicates)

    @property
    def total(self) -> Floats:
        """Predicted total errors, (series,)."""
        return np.hypot(self.statistical, self.design.systematic)

    @property
    def uncertainty(self) -> Floats:
        """Relative standard error of the predicted statistical errors, (series,), from the pilot's own."""
        parts = self.design.variance / self.replicates
        of_variance = np.sqrt(((parts * self.design.log_error) ** 2).sum(axis=-1))
        whole = parts.sum(axis=-1)
        share = np.divide(of_variance, whole, out=np.zeros(len(parts)), where=whole > 0)
        return np.asarray(0.5 * share)

    @property
    def equal_replicates(self) -> float:
        """Replicates of every size, the same for all, that cost as much."""
        return self.cost / float(self.design.cost.sum())

    @property
    def equal_statistical(self) -> Floats:
        """Statistical errors that these reach, (series,)."""
        return self.design.statistical(np.full(len(self.design.cost), self.equal_replicates))

    @property
    def equal_total(self) -> Floats:
        """Total errors that these reach, (series,)."""
        return np.hypot(self.equal_statistical, self.design.systematic)


def allocate_to_target(design: Design, target: float) -> Allocation:
    """Fewest core seconds with which every series whose systematic error is below the target reaches it.

    Where no series can, the floors.
    """
    reachable = design.systematic < target
    allowed = target**2 - design.systematic[reachable] ** 2
    optimum = _cheapest(design, design.variance[reachable] / allowed[:, np.newaxis])
    return Allocation(design, np.ceil(optimum - ROUNDING).astype(np.int64), reachable)


def allocate_budget(design: Design, budget: float) -> Allocation:
    """Smallest total error of the worst series within a budget in seconds of one core, the pilot's included.

    Raises ValueError where the floors alone cost more.
    """
    least = float(design.cost @ design.floors)
    if least > budget:
        raise ValueError(f"the fewest replicates allowed cost {least} s, more than {budget} s")
    squares = design.systematic**2
    worst = squares.max()
    beyond = float((design.statistical(design.floors) ** 2 + squares).max() - worst)

    def optimum(log_excess: float) -> Floats:
        allowed = np.exp(log_excess) + worst - squares
        return _cheapest(design, design.variance / allowed[:, np.newaxis])

    chosen = design.floors.astype(np.float64)
    if beyond > 0:
        high = low = np.log(beyond)
        while design.cost @ optimum(low) < budget and high - low < MOST_FOLDS:
            low -= 1.0
        chosen = optimum(low)
        if low < high and design.cost @ chosen > budget:
            root = brentq(lambda x: float(design.cost @ optimum(x)) - budget, low, high, xtol=1e-9)
            chosen = optimum(float(root))
    return Allocation(design, _whole_within(design, chosen, budget), np.ones(len(squares), dtype=np.bool_))


def _whole_within(design: Design, optimum: Floats, budget: float) -> Counts:
    """Rounded down, then up where the budget allows, the dearest sizes first."""
    whole = np.maximum(np.floor(optimum + ROUNDING).astype(np.int64), design.floors)
    for i in np.argsort(-design.cost):
        one_more = whole + (np.arange(len(whole)) == i)
        if whole[i] < optimum[i] and design.cost @ one_more <= budget:
            whole = one_more
    return whole


def _cheapest(design: Design, parts: Floats) -> Floats:
    """Minimum of Σ c_i m_i with Σ_i parts_si/m_i ≤ 1 for every s and m_i ≥ floor_i, through the dual.

    With multipliers λ the minimum over m is m_i = max(floor_i, √(Σ_s λ_s parts_si/c_i)); what remains is
    concave and smooth in λ ≥ 0. One series alone has λ = (Σ_i √(c_i parts_i))², which is also what it costs.
    """
    cost, floors = design.cost, design.floors.astype(np.float64)
    parts = parts[(parts / floors).sum(axis=-1) > 1]
    if not len(parts):
        return floors
    alone = np.sqrt(parts * cost).sum(axis=-1) ** 2
    unit = alone.max()

    def replicates(multipliers: Floats) -> Floats:
        return np.asarray(np.maximum(floors, np.sqrt((multipliers * alone) @ parts / cost)))

    def dual(multipliers: Floats) -> tuple[float, Floats]:
        m = replicates(multipliers)
        slack = (parts / m).sum(axis=-1) - 1
        weighted = multipliers * alone
        return -float(cost @ m + weighted @ slack) / unit, -slack * alone / unit

    start = (alone == unit).astype(np.float64)
    found = minimize(
        dual,
        start,
        method="L-BFGS-B",
        jac=True,
        bounds=[(0, None)] * len(start),
        options={"ftol": 1e-15, "gtol": 1e-10, "maxiter": 2000, "maxfun": 10000},
    )
    m = replicates(found.x)
    # what the dual leaves unmet, in the last digits, is met by a common factor
    return m * max(1.0, float((parts / m).sum(axis=-1).max()))
