"""The catalogue of ensembles: every entry can be sampled and says what is true of it."""

import numpy as np
import pytest

from conetone.sprinkle.catalogue import DIMENSION, ENSEMBLES, PARAMETER_NAMES, sprinkle
from conetone.sprinkle.layered import kleitman_rothschild
from conetone.sprinkle.minkowski import minkowski_box, minkowski_diamond

EVERY_CHOICE = [
    (ensemble.name, dict(zip([p.name for p in ensemble.parameters], values, strict=True)))
    for ensemble in ENSEMBLES.values()
    for values in (
        [(value,) for value in range(ensemble.parameters[0].minimum, ensemble.parameters[0].maximum + 1)]
        if ensemble.parameters
        else [()]
    )
]


@pytest.mark.parametrize(("ensemble", "parameters"), EVERY_CHOICE, ids=str)
def test_samples_are_orders_of_the_size_asked_for(ensemble, parameters):
    for elements in (0, 1, 2, 17, 64, 100):
        order = sprinkle(ensemble, parameters, elements, np.random.default_rng(elements))
        assert order.elements == elements
        assert order.is_transitive
        again = sprinkle(ensemble, parameters, elements, np.random.default_rng(elements))
        assert again.digest == order.digest


def test_names_lead_to_their_samplers():
    direct = {
        "minkowski-diamond": minkowski_diamond(50, np.random.default_rng(1), dimension=3),
        "minkowski-box": minkowski_box(50, np.random.default_rng(1), dimension=3),
        "kleitman-rothschild": kleitman_rothschild(50, np.random.default_rng(1)),
    }
    assert set(direct) == set(ENSEMBLES)
    for name, order in direct.items():
        parameters = {parameter.name: 3 for parameter in ENSEMBLES[name].parameters}
        assert sprinkle(name, parameters, 50, np.random.default_rng(1)).digest == order.digest
        assert ENSEMBLES[name].name == name


def test_unknown_names_and_parameters_are_refused():
    with pytest.raises(KeyError):
        sprinkle("minkowski-cylinder", {}, 10, np.random.default_rng(1))
    with pytest.raises(TypeError):
        sprinkle("minkowski-diamond", {}, 10, np.random.default_rng(1))
    with pytest.raises(TypeError):
        sprinkle("kleitman-rothschild", {"dimension": 2}, 10, np.random.default_rng(1))


@pytest.mark.parametrize("dimension", range(2, 8))
def test_stated_ordering_fractions_hold(dimension):
    stated = [e for e in ENSEMBLES.values() if e.ordering_fraction is not None and DIMENSION in e.parameters]
    assert [ensemble.name for ensemble in stated] == ["minkowski-diamond"]
    for ensemble in stated:
        for seed in range(3):
            generator = np.random.default_rng([dimension, seed])
            fractions = [
                sprinkle(ensemble.name, {"dimension": dimension}, 100, generator).ordering_fraction
                for _ in range(100)
            ]
            error = np.std(fractions, ddof=1) / 10
            assert abs(np.mean(fractions) - ensemble.ordering_fraction({"dimension": dimension})) < 5 * error


def test_every_parameter_has_a_column():
    assert set(PARAMETER_NAMES) == {p.name for e in ENSEMBLES.values() for p in e.parameters}
    assert len(set(PARAMETER_NAMES)) == len(PARAMETER_NAMES)
