"""Rational extrapolation of the partial sums of Σ 1/k² = π²/6 (Euler)."""

import numpy as np
import pytest

from conetone.aggregate.sequence import extrapolate_sequence

# Tableau of Henkel & Schütz (1988, J. Phys. A 21, 2617) with ω = 1 of the sums to n = 1 … 8, h = 1/n: a value
# found numerically, confirmed in a second implementation.
LIMIT_OF_EIGHT = 1.644934052757513


def test_sum_of_inverse_squares():
    n = np.arange(1.0, 9)
    found = extrapolate_sequence(1 / n, np.cumsum(1 / n**2), 1.0)
    assert found.value == pytest.approx(LIMIT_OF_EIGHT, abs=2e-13)
    assert found.value == pytest.approx(np.pi**2 / 6, abs=1e-7)
    assert abs(found.value - np.pi**2 / 6) < found.error < 1e-6
