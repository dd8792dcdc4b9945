"""Rational extrapolation against closed forms, and against the rational function itself."""

import re
from fractions import Fraction

import numpy as np
import pytest

from conetone.aggregate.sequence import LARGEST_NOISE, extrapolate_sequence
from conetone.errors import InputError

N = np.arange(1, 11)


def plain_limit(h, values):
    """The same tableau in exact arithmetic, ω = 1, entry by entry (Henkel & Schütz 1988, from memory)."""
    h, values = [Fraction(x) for x in h], [Fraction(x) for x in values]
    table = [[Fraction(0)] * (len(values) + 1), values]
    for m in range(1, len(values)):
        older, old = table[-2:]
        new = []
        for i in range(len(values) - m):
            step = old[i + 1] - old[i]
            inner = 1 - step / (old[i + 1] - older[i + 1])
            new.append(old[i + 1] + step / (h[i] / h[i + m] * inner - 1))
        table.append(new)
    return float(table[-1][0]), float(2 * abs(table[-2][1] - table[-2][0]))


def test_it_is_the_tableau_in_exact_arithmetic():
    for seed in range(200):
        generator = np.random.default_rng(seed)
        count = generator.integers(3, 8)
        h = np.sort(generator.uniform(0.1, 1, count))[::-1]
        values = generator.normal(size=count)  # no limit to speak of: every difference is of order one
        limit, error = plain_limit(h, values)
        found = extrapolate_sequence(h, values, 1.0)
        scale = 1e-6 * max(abs(limit), error, 1)
        assert found.value == pytest.approx(limit, abs=scale)
        assert found.error == pytest.approx(error, abs=scale)


def test_three_values_on_a_rational_function_give_its_value_at_zero():
    # the third column is (a + b h)/(1 + c h) through three values
    for seed in range(200):
        a, b, c = np.random.default_rng(seed).uniform(0.5, 2, 3) * [1, -1, 1]
        h = np.array([0.5, 0.3, 0.1])
        found = extrapolate_sequence(h, (a + b * h) / (1 + c * h), 1.0)
        assert found.value == pytest.approx(a, rel=1e-10)


@pytest.mark.parametrize("omega", [0.5, 1.0, 4 / 3, 2.0])
@pytest.mark.parametrize("slope", [-2.0, 1e-3, 0.0])
def test_an_exact_power_is_extrapolated_exactly(omega, slope):
    h = 1 / N
    found = extrapolate_sequence(h, 0.75 + slope * h**omega, omega)
    assert found.value == pytest.approx(0.75, rel=1e-12)
    assert found.error < 1e-11


# limits in closed form: partial sums, the Leibniz-like product of Wallis, polygons in a circle (in h² = 1/n²)
SEQUENCES = {
    "1/k²": (1.0, np.cumsum(1.0 / N**2), np.pi**2 / 6, 1e-8),
    "1/k³": (2.0, np.cumsum(1.0 / N**3), 1.2020569031595942, 1e-3),
    "Wallis": (1.0, np.cumprod(4.0 * N**2 / (4 * N**2 - 1)), np.pi / 2, 1e-8),
    "polygons": (2.0, (N + 2) * np.sin(np.pi / (N + 2)), np.pi, 1e-11),
}


@pytest.mark.parametrize("name", SEQUENCES)
def test_known_limits(name):
    omega, values, limit, accuracy = SEQUENCES[name]
    h = 1 / (N + 2.0) if name == "polygons" else 1.0 / N
    found = extrapolate_sequence(h, values, omega)
    assert abs(found.value - limit) < accuracy
    assert abs(found.value - limit) < max(found.error, 1e-12)
    assert abs(found.value - limit) < abs(values[-1] - limit) / 10


def test_a_constant_sequence():
    found = extrapolate_sequence(1 / N, np.full(10, 0.1), 1.0)
    assert (found.value, found.error) == (0.1, 0)


def test_the_limit_scales_with_the_sequence_and_not_with_h():
    values = np.cumsum(1.0 / N**2)
    plain = extrapolate_sequence(1 / N, values, 1.0)
    scaled = extrapolate_sequence(8 / N, -4 * values, 1.0)
    assert scaled.value == pytest.approx(-4 * plain.value, rel=1e-9)


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_noise_as_large_as_allowed_stays_far_below_the_last_difference(seed):
    values = np.cumsum(1.0 / N**2)
    last = abs(values[-1] - values[-2])
    errors = np.full(10, 0.99 * LARGEST_NOISE * last)
    noise = np.random.default_rng(seed).normal(size=10)
    noisy = extrapolate_sequence(1 / N, values + errors * noise, 1.0, errors)
    assert abs(noisy.value - np.pi**2 / 6) < 0.01 * last


def test_more_noise_is_magnified_which_is_why_it_is_refused():
    values = np.cumsum(1.0 / N**2)
    last = abs(values[-1] - values[-2])
    worst = 0.0
    for seed in range(100):
        noise = 0.01 * last * np.random.default_rng(seed).normal(size=10)
        worst = max(worst, abs(extrapolate_sequence(1 / N, values + noise, 1.0).value - np.pi**2 / 6))
    assert worst > last
    errors = np.full(10, 0.01 * last)
    with pytest.raises(
        InputError, match=re.escape("errors[0]: found 0.0001 beside a last difference of 0.01")
    ):
        extrapolate_sequence(1 / N, values, 1.0, errors)


@pytest.mark.parametrize("bad", [1e-3, np.nan, np.inf])
def test_a_single_noisy_value_is_refused(bad):
    errors = np.zeros(10)
    errors[4] = bad
    with pytest.raises(InputError, match=r"errors\[4\].*magnifies noise"):
        extrapolate_sequence(1 / N, np.cumsum(1.0 / N**2), 1.0, errors)


def test_rounding_is_no_noise():
    values = np.cumsum(1.0 / N**2)
    assert extrapolate_sequence(1 / N, values, 1.0, values * 1e-16) == extrapolate_sequence(
        1 / N, values, 1.0
    )


def test_a_sequence_without_limit():
    with pytest.raises(InputError, match="a pole at h = 0"):
        extrapolate_sequence(1 / N, 1.0 * N, 1.0)


@pytest.mark.parametrize(
    ("h", "values", "omega", "errors", "message"),
    [
        ([1, 0.5], [1, 2], 1, None, "at least 3"),
        ([1, 0.5, 0.2], [1, 2], 1, None, "3 steps h and 2 values"),
        ([1, 0.5, 0.2], [1, 2, 3, 4], 1, None, "3 steps h and 4 values"),
        ([0.2, 0.5, 1], [1, 2, 3], 1, None, "smaller than the last"),
        ([1, 0.5, 0], [1, 2, 3], 1, None, "positive"),
        ([1, 0.5, np.nan], [1, 2, 3], 1, None, "positive"),
        ([1, 0.5, 0.2], [1, 2, np.nan], 1, None, "finite"),
        ([1, 0.5, 0.2], [1, 2, 3], 0, None, "ω: found 0"),
        ([1, 0.5, 0.2], [1, 2, 3], np.nan, None, "ω: found nan"),
        ([1, 0.5, 0.2], [1, 2, 3], 1, [0, 0], r"shape \(2,\)"),
    ],
)
def test_what_is_no_sequence(h, values, omega, errors, message):
    arrays = [np.array(x, dtype=float) for x in (h, values)]
    with pytest.raises(InputError, match=message):
        extrapolate_sequence(*arrays, omega, None if errors is None else np.array(errors, dtype=float))
