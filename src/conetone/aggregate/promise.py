"""What is promised of total errors, and whether a coverage keeps it."""

from dataclasses import dataclass
from typing import Literal

from conetone.aggregate.coverage import Coverage

Verdict = Literal["kept", "too narrow", "wasteful"]

# A promise is broken where the coverage is so many binomial standard errors away from it (Wilson's interval).
ALLOWANCE = 2.0


@dataclass(frozen=True)
class Promise:
    """The least coverage of one total error and of two; above `most`, one error is wider than need be."""

    least_68: float
    least_95: float
    most_68: float = 1.0


# Model averages are wider than need be wherever the simplest model is the true one.
INSIDE = Promise(0.63, 0.92, 0.88)
OUTSIDE = Promise(0.58, 0.88)


def verdict(coverage: Coverage, *, inside: bool) -> Verdict:
    """Whether errors keep their promise for truths inside or outside of the set of models."""
    promise = INSIDE if inside else OUTSIDE
    one, two = coverage.within(1, ALLOWANCE), coverage.within(2, ALLOWANCE)
    if one.high < promise.least_68 or two.high < promise.least_95:
        return "too narrow"
    return "wasteful" if one.low > promise.most_68 else "kept"
