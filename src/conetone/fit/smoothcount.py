"""The smooth count Σ_r g(λ_r/Λ) of a spectrum, g(x) = exp(−x^−2), and the cut-offs where it reaches a rank.

It is the trace of exp(−Λ² M^−2) over the ranked eigenvalues, in the spirit of a heat kernel: a count of those
above Λ that knows no bins and no ranks, and in which steps by multiplets are smoothed away faster than any
power (the transform of its weight in log λ falls as exp(−πω/4)). Of λ_r = A r^−α it is
Γ(1 + 1/2α) (A/Λ)^(1/α) − 1/2 − ζ(−2α) (Λ/A)² + … (Euler–Maclaurin), so the count plus 1/2, the *smooth rank*
ρ, falls as a power of Λ with the same exponent, up to corrections of relative order ρ^(−1−2α). The data are
therefore log Λ at given smooth ranks, and are fitted as log λ at ranks is.
"""

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from itertools import pairwise
from math import gamma

import numpy as np
from numpy.typing import NDArray

from conetone.fit.windows import Window

Floats = NDArray[np.float64]

# g(x) = exp(−x^−SHARPNESS). Sharper weights keep the steps of multiplets; softer ones reach further down.
SHARPNESS = 2.0
# Eigenvalues beyond those known are completed by their own power law; cut-offs reach down to where the first
# of them weighs exp(−TAIL), 1 % of the count all together, so that errors of the completion do not matter.
TAIL = 4.0
# Smooth ranks reach to the number of known eigenvalues over this, for any exponent above 0.62.
REACH = 3.3
# Steps of log Λ at most, between which the count is interpolated, and the weight below which g is zero.
STEP, SMALLEST = 0.05, 1e-15


@dataclass(frozen=True)
class SmoothRanks:
    """Smooth ranks at which log Λ is taken, rising."""

    at: tuple[float, ...]

    def __post_init__(self) -> None:
        if not self.at or self.at[0] < 1 or any(np.diff(self.at) <= 0):
            raise ValueError(f"smooth ranks rise from 1 on, found {self.at}")

    @property
    def count(self) -> int:
        """Number of points."""
        return len(self.at)

    @property
    def ranks(self) -> Floats:
        """The smooth ranks, shape (count,)."""
        return np.array(self.at)

    def of(self, by_rank: Callable[[Floats], Floats]) -> Floats:
        """A function of rank at the smooth ranks, shape (count,)."""
        return by_rank(self.ranks)

    def inside(self, window: Window) -> slice:
        """The points of a window, both ends included, rounding errors forgiven."""
        low, high = window.first * (1 - 1e-9), window.last * (1 + 1e-9)
        indices = np.flatnonzero((self.ranks >= low) & (self.ranks <= high))
        return slice(int(indices[0]), int(indices[-1]) + 1) if indices.size else slice(0, 0)


def ranks_of_windows(windows: Sequence[Window], points: int) -> SmoothRanks:
    """Log-spaced smooth ranks over all windows together, about `points` of them, all ends among them."""
    ends = sorted({end for window in windows for end in (window.first, window.last)})
    total = np.log(ends[-1] / ends[0])
    ranks = {float(end) for end in ends}
    for low, high in pairwise(ends):
        parts = max(1, round((points - 1) * float(np.log(high / low) / total)))
        ranks.update(float(rank) for rank in np.geomspace(low, high, parts + 1)[1:-1])
    return SmoothRanks(tuple(sorted(ranks)))


def log_cutoffs(spectrum: Floats, ranks: Floats, *, complete: bool) -> Floats:
    """log Λ at which the smooth count of a falling spectrum plus 1/2 reaches each of the given ranks.

    `ranks` (m,), rising from 1 or more; result (m,), NaN where the spectrum is too short. Unless the spectrum
    is `complete` there are smaller ones, unknown, for which the power law of its last two thirds stands.
    """
    known = np.log(spectrum)
    logs = known if complete else np.concatenate([known, _completion(known)])
    lowest = known[-1] + (0.0 if complete else np.log(TAIL) / SHARPNESS)
    # at the cut-off λ_3m the count is 3m/e at least: no need to look further down
    lowest = max(lowest, known[min(len(known) - 1, 3 * int(np.ceil(ranks[-1])))])
    # above the largest eigenvalue the count vanishes doubly exponentially
    highest = known[0] + np.log(-np.log(1e-6)) / SHARPNESS
    cutoffs = np.linspace(highest, lowest, int(np.ceil((highest - lowest) / STEP)) + 1)
    reach = np.log(-np.log(SMALLEST)) / SHARPNESS
    logs = logs[logs >= cutoffs[-1] - reach]
    counts = np.exp(-np.exp(np.minimum(SHARPNESS * (cutoffs[:, np.newaxis] - logs), 100.0))).sum(axis=1)
    from scipy.interpolate import CubicSpline  # half a second, which jobs that fit nothing do not need

    inverse = CubicSpline(np.log(counts + 0.5), cutoffs, extrapolate=False)
    return np.asarray(inverse(np.log(ranks)), dtype=np.float64)


def smooth_share(exponent: float) -> float:
    """Smooth rank of λ_r = A r^−α at Λ = A R^−α over R: ∫ exp(−u^2α) du = Γ(1 + 1/2α)."""
    return gamma(1 + 1 / (SHARPNESS * exponent))


def _completion(known: Floats) -> Floats:
    """Logs of eigenvalues beyond the known ones, all that matter, by the power law of the last two thirds."""
    count = len(known)
    if count < 3:
        return np.empty(0)
    log_ranks = np.log(np.arange(1, count + 1))
    slope = float(np.polyfit(log_ranks[count // 3 :], known[count // 3 :], 1)[0])
    further = np.log(np.arange(count + 1, 8 * count))
    return np.asarray(known[-1] + min(slope, -0.1) * (further - log_ranks[-1]))
