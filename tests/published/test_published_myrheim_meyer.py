"""The dimension of an ordering fraction against Myrheim 1978 (CERN-TH-2538) and Meyer 1988 (MIT thesis)."""

from fractions import Fraction

import numpy as np
import pytest

from conetone.aggregate.dimension import myrheim_meyer_dimension
from conetone.sprinkle.layered import kleitman_rothschild
from conetone.sprinkle.minkowski import minkowski_diamond

# 2 χ₂ by dimension, as rationals from memory, and the six figures of the printed table.
ORDERING_FRACTION = {
    2: (Fraction(1, 2), 0.5),
    3: (Fraction(8, 35), 0.228571),
    4: (Fraction(1, 10), 0.1),
    5: (Fraction(128, 3003), 0.0426240),
    6: (Fraction(1, 56), 0.0178571),
    7: (Fraction(1024, 138567), 0.00738993),
}
SEEDS = (1, 2, 3)
ELEMENTS, ORDERS = 150, 40


@pytest.mark.parametrize("dimension", ORDERING_FRACTION)
def test_the_printed_table_gives_whole_dimensions(dimension):
    exact, printed = ORDERING_FRACTION[dimension]
    assert myrheim_meyer_dimension(float(exact), None).value == pytest.approx(dimension, rel=1e-10)
    rounding = 10.0 ** (np.floor(np.log10(printed)) - 5)  # one unit of the sixth figure
    found = myrheim_meyer_dimension(printed, rounding)
    assert abs(found.value - dimension) <= found.error + 1e-9


def test_a_chain_has_one_dimension():
    # every pair is related: 2 χ₂(1) = 1
    assert myrheim_meyer_dimension(1.0, None).value == pytest.approx(1, abs=1e-10)


def found_dimension(fractions):
    return myrheim_meyer_dimension(
        float(np.mean(fractions)), float(np.std(fractions, ddof=1) / np.sqrt(len(fractions)))
    )


@pytest.mark.parametrize("seed", SEEDS)
@pytest.mark.parametrize("dimension", [2, 3, 4, 5])
def test_sprinklings_have_the_dimension_of_their_spacetime(dimension, seed):
    generator = np.random.default_rng([seed, dimension])
    found = found_dimension(
        [minkowski_diamond(ELEMENTS, generator, dimension=dimension).ordering_fraction for _ in range(ORDERS)]
    )
    assert abs(found.value - dimension) < 5 * found.error
    assert found.error < 0.1


@pytest.mark.parametrize("seed", SEEDS)
def test_orders_of_three_layers_imitate_a_dimension_of_2_4(seed):
    # ordering fraction 3/8 (Kleitman & Rothschild 1975)
    assert myrheim_meyer_dimension(3 / 8, None).value == pytest.approx(2.4, abs=0.03)
    generator = np.random.default_rng(seed)
    found = found_dimension([kleitman_rothschild(400, generator).ordering_fraction for _ in range(ORDERS)])
    # bottom and top are all related by now; n = 400 has 400/399 of the share of pairs
    expected = myrheim_meyer_dimension(3 / 8 * 400 / 399, None).value
    assert abs(found.value - expected) < 5 * found.error
