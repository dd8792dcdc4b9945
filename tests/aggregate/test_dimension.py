"""Dimensions of exponents and of ordering fractions, their intervals, and when they disagree."""

import numpy as np
import pytest

from conetone.aggregate.curves import ExpectedCurve, MeasuredCurve
from conetone.aggregate.dimension import (
    disagreement,
    myrheim_meyer_dimension,
    spectral_dimension,
)
from conetone.errors import InputError
from conetone.reference.flat import ordering_fraction_of_diamond

EXPECTED = ExpectedCurve()
WHOLE = np.arange(2.0, 8.0)
SEEDS = (1, 2, 3)
ONE_SIGMA = 0.6826895


def expected_exponents(dimensions):
    return dimensions / (2 * (dimensions - 1))


def measured(errors=0.01):
    return MeasuredCurve.through(WHOLE, expected_exponents(WHOLE), errors * np.ones(len(WHOLE)))


def random_curve(generator):
    dimensions = np.cumsum(generator.uniform(0.3, 2, generator.integers(2, 7))) + 1
    exponents = 2 - np.cumsum(generator.uniform(0.01, 0.3, len(dimensions)))
    return MeasuredCurve.through(dimensions, exponents, generator.uniform(0, 1, len(dimensions)))


def test_the_expected_curve_inverts_d_over_two_d_minus_two():
    dimensions = np.linspace(1.1, 30, 300)
    np.testing.assert_allclose(EXPECTED.dimensions_of(expected_exponents(dimensions)), dimensions, rtol=1e-12)
    for dimension in dimensions:
        assert EXPECTED.exponent_of(dimension) == pytest.approx(expected_exponents(dimension), rel=1e-14)
        h = 1e-5
        slope = (expected_exponents(dimension + h) - expected_exponents(dimension - h)) / (2 * h)
        assert EXPECTED.slope_of(dimension) == pytest.approx(slope, rel=1e-6)
    np.testing.assert_allclose(EXPECTED.dimensions_of(np.array([1.0, 0.75, 2 / 3])), [2, 3, 4])
    assert np.isnan(EXPECTED.dimensions_of(np.array([0.5, 0.3, -1.0]))).all()


def test_between_whole_dimensions_a_measured_curve_loses_nothing_of_the_expected_one():
    curve = measured()
    dimensions = np.linspace(2, 7, 101)
    np.testing.assert_allclose(curve.dimensions_of(expected_exponents(dimensions)), dimensions, rtol=1e-9)
    for dimension in dimensions:
        assert curve.exponent_of(dimension) == pytest.approx(expected_exponents(dimension), rel=1e-12)
        assert curve.slope_of(dimension) == pytest.approx(EXPECTED.slope_of(dimension), rel=1e-9)
    assert np.isnan(curve.dimensions_of(np.array([1.01, 0.58, 0.5]))).all()
    assert np.isnan([curve.exponent_of(1.9), curve.exponent_of(7.1), curve.slope_of(1.9)]).all()


def test_measured_curves_pass_their_nodes_fall_and_are_inverted():
    generator = np.random.default_rng(1)
    for _ in range(100):
        curve = random_curve(generator)
        found = [curve.exponent_of(dimension) for dimension in curve.dimensions]
        np.testing.assert_allclose(found, curve.exponents, rtol=1e-12)
        dimensions = np.linspace(curve.dimensions[0], curve.dimensions[-1], 12)[1:-1]
        exponents = np.array([curve.exponent_of(dimension) for dimension in dimensions])
        assert (np.diff(exponents) < 0).all()
        np.testing.assert_allclose(curve.dimensions_of(exponents), dimensions, rtol=1e-6)
        middle, h = float(dimensions[5]), 1e-6
        slope = (curve.exponent_of(middle + h) - curve.exponent_of(middle - h)) / (2 * h)
        assert curve.slope_of(middle) == pytest.approx(slope, rel=1e-3, abs=1e-6)
        # at a node the curve is as uncertain as the node
        assert curve.error_of(curve.exponents[0]) == pytest.approx(curve.errors[0], rel=1e-5, abs=1e-9)


@pytest.mark.parametrize("seed", SEEDS)
def test_the_error_of_a_measured_curve_is_its_scatter(seed):
    generator = np.random.default_rng(seed)
    curve = random_curve(generator)
    count, scale = 1000, 1e-3 * -np.diff(curve.exponents).max()
    small = MeasuredCurve(curve.dimensions, curve.exponents, tuple(scale * np.array(curve.errors)))
    dimension = float(generator.uniform(curve.dimensions[0], curve.dimensions[-1]))
    drawn = [
        MeasuredCurve(
            small.dimensions,
            tuple(generator.normal(small.exponents, small.errors).tolist()),
            small.errors,
        ).exponent_of(dimension)
        for _ in range(count)
    ]
    expected = small.error_of(curve.exponent_of(dimension))
    assert abs(np.std(drawn) / expected - 1) < 5 / np.sqrt(2 * count)


def test_a_curve_ends_where_it_falls_no_further():
    curve = MeasuredCurve.through([4, 2, 3, 5, 6], [0.7, 1, 0.8, 0.71, 0.6], [0.1, 0.2, 0.3, 0.4, 0.5])
    assert curve == MeasuredCurve((2, 3, 4), (1, 0.8, 0.7), (0.2, 0.3, 0.1))
    assert MeasuredCurve.through([2, 3], [0.7, 0.8], [0.1, 0.1]) is None
    assert MeasuredCurve.through([2, 2], [0.8, 0.7], [0.1, 0.1]) is None
    assert MeasuredCurve.through([2], [0.7], [0.1]) is None
    assert MeasuredCurve.through([], [], []) is None


@pytest.mark.parametrize(
    ("nodes", "place"),
    [
        (((2,), (1,), (0.1,)), "curve"),
        (((2, 3), (1,), (0.1, 0.1)), "curve"),
        (((3, 2), (1, 0.9), (0.1, 0.1)), "dimensions"),
        (((1, 2), (1, 0.9), (0.1, 0.1)), "dimensions"),
        (((2, 3), (0.9, 0.9), (0.1, 0.1)), "exponents"),
        (((2, 3), (1, 0.9), (0.1, -0.1)), "errors"),
        (((2, 3), (1, 0.9), (0.1, np.nan)), "errors"),
    ],
)
def test_what_is_no_curve(nodes, place):
    with pytest.raises(InputError, match=f"^{place}: found"):
        MeasuredCurve(*nodes)


@pytest.mark.parametrize("curve", [EXPECTED, measured()], ids=["expected", "measured"])
def test_small_errors_are_carried_by_the_derivative(curve):
    generator = np.random.default_rng(5)
    samples = [generator.normal(0.7, 1e-4, size=count) for count in (12, 30)]
    # an exponent that is the mean of the means at both sizes
    means = [sample.mean() for sample in samples]
    exponent = sum(means) / 2
    copies = [
        np.array([exponent + (np.delete(sample, i).mean() - sample.mean()) / 2 for i in range(len(sample))])
        for sample in samples
    ]
    statistical = np.sqrt(sum(sample.var(ddof=1) / len(sample) for sample in samples)) / 2
    found = spectral_dimension(exponent, statistical, 1e-4, copies, curve)
    slope = -2 / (2 * exponent - 1) ** 2  # of 2a/(2a − 1)
    assert found.value == pytest.approx(2 * exponent / (2 * exponent - 1), rel=1e-9)
    assert found.statistical == pytest.approx(abs(slope) * statistical, rel=1e-3)
    for distance in (found.systematic_low, found.systematic_high):
        assert distance == pytest.approx(abs(slope) * 1e-4, rel=2e-3)
    total = np.hypot(statistical, 1e-4)
    assert found.exponent_error == pytest.approx(np.hypot(total, curve.error_of(exponent)), rel=1e-9)
    if curve is EXPECTED:
        assert found.high - found.low == pytest.approx(2 * abs(slope) * total, rel=1e-3)
    assert found.sentence is None


def test_intervals_are_as_lopsided_as_the_curve():
    found = spectral_dimension(0.6, 0.03, 0.04, [np.array([0.6])], EXPECTED)
    assert (found.value, found.low, found.high) == pytest.approx((6, 1.3 / 0.3, 1.1 / 0.1))
    assert found.systematic_low == pytest.approx(6 - 1.28 / 0.28)
    assert found.systematic_high == pytest.approx(1.12 / 0.12 - 6)


@pytest.mark.parametrize("seed", SEEDS)
def test_the_interval_covers_where_the_curve_is_bent(seed):
    count, dimension, error = 4000, 4.0, 0.09
    drawn = np.random.default_rng(seed).normal(expected_exponents(dimension), error, size=count)
    found = [spectral_dimension(exponent, error, 0, [], EXPECTED) for exponent in drawn]
    covered = [
        each.low is not None and each.low <= dimension and (each.high is None or dimension <= each.high)
        for each in found
    ]
    assert any(each.high is None for each in found)
    assert abs(np.mean(covered) - ONE_SIGMA) < 5 * np.sqrt(ONE_SIGMA * (1 - ONE_SIGMA) / count)


def test_exponents_without_a_dimension_say_so():
    none = spectral_dimension(0.48, 0.03, 0.04, [np.array([0.47, 0.49])], EXPECTED)
    assert (none.value, none.high, none.statistical, none.systematic_low) == (None, None, None, None)
    assert none.low == pytest.approx(1.06 / 0.06)  # at least that many
    assert "0.48" in none.sentence
    assert "heuristic" in none.sentence
    nothing = spectral_dimension(0.3, 0.03, 0.04, [], EXPECTED)
    assert (nothing.value, nothing.low, nothing.high) == (None, None, None)
    outside = spectral_dimension(0.55, 0.01, 0.01, [], measured())
    assert (outside.value, outside.low, outside.high) == (None, None, None)
    assert "0.583 at d = 7 to 1 at d = 2" in outside.sentence


def test_a_copy_without_a_dimension_leaves_no_statistical_error():
    found = spectral_dimension(0.51, 0.03, 0.04, [np.array([0.499, 0.521])], EXPECTED)
    assert found.value == pytest.approx(51)
    assert found.statistical is None
    assert found.high is None


def test_exponents_above_one_lie_below_two_dimensions():
    clearly = spectral_dimension(1.2, 0.03, 0.04, [], EXPECTED)
    assert clearly.value == pytest.approx(2.4 / 1.4)
    assert "above that of two dimensions" in clearly.sentence
    within_its_error = spectral_dimension(1.02, 0.03, 0.04, [], EXPECTED)
    assert within_its_error.value < 2
    assert within_its_error.sentence is None


def test_ordering_fractions_are_inverted_with_their_errors():
    for dimension in np.linspace(1, 19.9, 200):
        fraction = min(ordering_fraction_of_diamond(dimension), 1.0)
        found = myrheim_meyer_dimension(fraction, 1e-3 * fraction)
        assert found.value == pytest.approx(dimension, rel=1e-10)
        h = 1e-6
        slope = (
            ordering_fraction_of_diamond(dimension + h) - ordering_fraction_of_diamond(dimension - h)
        ) / (2 * h)
        assert found.error == pytest.approx(1e-3 * fraction / abs(slope), rel=1e-5)
        assert found.sentence is None
    assert myrheim_meyer_dimension(0.5, None).error is None


def test_ordering_fractions_without_a_dimension():
    none = myrheim_meyer_dimension(0.0, 0.001)
    assert (none.value, none.error) == (None, None)
    assert "more than 20 dimensions" in none.sentence
    for impossible in (-0.1, 1.1, np.nan):
        with pytest.raises(InputError, match="ordering_fraction"):
            myrheim_meyer_dimension(impossible, 0.1)


@pytest.mark.parametrize("seed", SEEDS)
@pytest.mark.parametrize("curve", [EXPECTED, measured(0.0)], ids=["expected", "measured"])
def test_on_a_manifold_deviations_are_standard_normal(curve, seed):
    generator = np.random.default_rng(seed)
    count, dimension, error = 300, 3.0, 0.02
    fraction = ordering_fraction_of_diamond(dimension)
    deviations = []
    for _ in range(count):
        spectral = spectral_dimension(generator.normal(0.75, error), error * 0.6, error * 0.8, [], curve)
        ordering = myrheim_meyer_dimension(generator.normal(fraction, 0.005), 0.005)
        deviations.append(disagreement(spectral, ordering).deviation)
    assert abs(np.mean(deviations)) < 5 / np.sqrt(count)
    assert abs(np.var(deviations) - 1) < 5 * np.sqrt(2 / count)


def test_small_errors_measure_the_distance_of_dimensions():
    spectral = spectral_dimension(0.75 - 2e-4, 1e-4, 0, [], EXPECTED)
    ordering = myrheim_meyer_dimension(ordering_fraction_of_diamond(3.0), 1e-4)
    slope = 2 / (2 * 0.75 - 1) ** 2
    distance = (spectral.value - ordering.value) / np.hypot(slope * 1e-4, ordering.error)
    assert distance > 0
    assert disagreement(spectral, ordering).deviation == pytest.approx(distance, rel=2e-3)


def test_an_order_of_three_layers_is_not_like_a_manifold():
    # ordering fraction 3/8 (Kleitman & Rothschild 1975) beside a spectrum that falls too slowly for it
    ordering = myrheim_meyer_dimension(3 / 8, 0.001)
    for exponent, words in ((0.6, "6.00 by the expected exponents (heuristic)"), (0.3, "none by the")):
        found = disagreement(spectral_dimension(exponent, 0.02, 0.03, [], EXPECTED), ordering)
        assert found.deviation > 3
        assert found.sentence.startswith("not like a manifold of that dimension")
        assert words in found.sentence
        assert "2.38 by the ordering fraction" in found.sentence
    near = disagreement(spectral_dimension(0.8, 0.02, 0.03, [], EXPECTED), ordering)
    assert 0 < near.deviation < 3
    assert near.sentence is None


def test_no_deviation_without_both_dimensions():
    spectral = spectral_dimension(0.75, 0.02, 0.03, [], EXPECTED)
    for ordering in (
        myrheim_meyer_dimension(0.0, 0.1),
        myrheim_meyer_dimension(0.5, None),
        myrheim_meyer_dimension(1.0, 0.1),  # one dimension, in which no exponent is expected
    ):
        assert disagreement(spectral, ordering).deviation is None
    beyond = spectral_dimension(0.75, 0.02, 0.03, [], measured())
    assert disagreement(beyond, myrheim_meyer_dimension(0.6, 0.001)).deviation is None
