"""Differences and ratios of exponents: against plain loops, and against the scatter of repeated samples."""

from math import hypot, log, sqrt

import numpy as np
import pytest

from conetone.aggregate.derived import Derived, Ingredient, derive


def difference(a, b):
    return a - b


def ratio(a, b):
    return a / b


def ingredient(samples, value=lambda means: sum(means), systematic=0.0):
    """A number made of the means of samples, {sample: {replicate: x}}, with its delete-one copies."""

    def without(left_out):
        return value(
            [
                np.mean([x for r, x in sample.items() if (name, r) != left_out])
                for name, sample in samples.items()
            ]
        )

    orders = [(name, r) for name, sample in samples.items() for r in sample]
    return Ingredient(without(None), systematic, np.array([without(order) for order in orders]), orders)


def random_ingredients(generator, count):
    """Ingredients of several samples, some of them shared, with some replicates missing from each."""
    found = []
    for _ in range(count):
        names = [name for name in "ABC" if generator.random() < 0.7] or ["A"]
        samples = {
            name: {r: generator.normal(3, 1) for r in range(7) if generator.random() < 0.8 or r < 2}
            for name in names
        }
        found.append(ingredient(samples, systematic=generator.uniform(0, 0.2)))
    return found


def plain_derive(function, ingredients):
    """Statistical and systematic error with nothing but loops."""
    names = {name for each in ingredients for name, _ in each.orders}
    variance = 0.0
    for name in names:
        orders = {order for each in ingredients for order in each.orders if order[0] == name}
        copies = []
        for order in orders:
            values = []
            for each in ingredients:
                held = list(each.orders).index(order) if order in each.orders else None
                values.append(each.value if held is None else each.copies[held])
            copies.append(function(*values))
        mean, count = sum(copies) / len(copies), len(copies)
        variance += (count - 1) / count * sum((copy - mean) ** 2 for copy in copies)
    centre = function(*[each.value for each in ingredients])
    systematic = 0.0
    for each in ingredients:
        moved = []
        for sign in (-1, 1):
            values = [
                other.value + sign * other.systematic if other is each else other.value
                for other in ingredients
            ]
            moved.append(abs(function(*values) - centre))
        systematic += max(moved) ** 2
    return centre, sqrt(variance), sqrt(systematic)


@pytest.mark.parametrize(
    ("function", "count"), [(difference, 2), (ratio, 2), (lambda a: a**2, 1), (lambda a, b, c: a * b - c, 3)]
)
def test_against_loops(function, count):
    for seed in range(80):
        ingredients = random_ingredients(np.random.default_rng(seed), count)
        found = derive(function, ingredients)
        value, statistical, systematic = plain_derive(function, ingredients)
        assert found.value == pytest.approx(value, rel=1e-12)
        assert found.statistical == pytest.approx(statistical, rel=1e-10)
        assert found.systematic == pytest.approx(systematic, rel=1e-10)
        assert found.total == pytest.approx(hypot(statistical, systematic), rel=1e-10)


def test_of_one_number_it_is_that_number():
    one = ingredient({"A": {0: 1.0, 1: 2.0, 2: 4.0}}, systematic=0.3)
    found = derive(lambda a: a, [one])
    assert found.value == pytest.approx(7 / 3)
    assert found.statistical == pytest.approx(np.std([1, 2, 4], ddof=1) / sqrt(3))
    assert found.systematic == pytest.approx(0.3)


def test_a_number_minus_itself_is_exactly_known_but_for_its_systematic_error():
    one = ingredient({"A": {r: float(r**2) for r in range(5)}}, systematic=0.3)
    found = derive(difference, [one, one])
    assert (found.value, found.statistical) == (0, 0)
    assert found.systematic == pytest.approx(0.3 * sqrt(2))


def test_of_independent_samples_errors_add_in_quadrature():
    generator = np.random.default_rng(1)
    one, other = (ingredient({name: dict(enumerate(generator.normal(3, 1, 9)))}) for name in "AB")
    alone = [derive(lambda a: a, [each]).statistical for each in (one, other)]
    assert derive(difference, [one, other]).statistical == pytest.approx(hypot(*alone))


def test_a_sample_of_one_order_has_no_scatter():
    one = Ingredient(2.0, 0.1, np.array([2.5]), [("A", 0)])
    assert derive(lambda a: a, [one]).statistical == 0


def test_errors_of_a_function_that_bends_are_those_of_the_worse_side():
    one = Ingredient(1.0, 0.5, np.array([]), [])
    assert derive(log, [one]).systematic == pytest.approx(log(2))
    assert derive(lambda a: 1 / a, [one]).systematic == pytest.approx(1)


def test_the_total_is_in_quadrature():
    assert Derived(1.0, 3.0, 4.0).total == 5


@pytest.mark.parametrize("seed", [1, 2, 3])
@pytest.mark.parametrize("function", [difference, ratio])
@pytest.mark.parametrize("shared", [True, False])
def test_errors_are_those_of_repeated_samples(shared, function, seed):
    # two numbers from two sizes; with shared orders most of their noise is common
    generator = np.random.default_rng([seed, shared])
    repetitions, replicates = 200, 12
    found = []
    for _ in range(repetitions):
        common, own, others = generator.normal(size=(3, 2, replicates)) * [[[0.3]], [[0.1]], [[0.1]]]
        if not shared:
            others = others + 0.3 * generator.normal(size=others.shape)
        parts = [2 + common + own, 1.5 + (common if shared else 0) + others]
        names = [("A", "B"), ("A", "B") if shared else ("C", "D")]
        pair = [
            ingredient({name: dict(enumerate(row)) for name, row in zip(own_names, part, strict=True)})
            for own_names, part in zip(names, parts, strict=True)
        ]
        result = derive(function, pair)
        found.append((result.value, result.statistical, result.value - function(4, 3)))
    values, errors, off = np.array(found).T
    # mean squares: their standard errors are √2/√400 of the variance, and the scatter of squared errors
    scatter, expected = values.var(ddof=1), (errors**2).mean()
    uncertainty = hypot(scatter * sqrt(2 / repetitions), (errors**2).std(ddof=1) / sqrt(repetitions))
    assert abs(expected - scatter) < 5 * uncertainty
    assert abs(off.mean()) < 5 * sqrt(scatter / repetitions) + 0.002
    # as if they were independent, the error of shared orders would be several times too large
    alone = np.sqrt(2 * (0.3**2 + 0.1**2) / replicates)
    if function is difference:
        share = np.sqrt(scatter) / hypot(alone, alone)
        assert share < 0.45 if shared else share == pytest.approx(1, abs=5 / sqrt(2 * repetitions))
