"""Every ensemble by name: its parameters, its sampler, and what is known about it, with sources."""

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Literal

import numpy as np

from conetone.reference.flat import ordering_fraction_of_diamond
from conetone.sprinkle.layered import kleitman_rothschild
from conetone.sprinkle.lightcone import Points
from conetone.sprinkle.minkowski import minkowski_box, minkowski_diamond, order_of_positions
from conetone.sprinkle.order import Order

Parameters = Mapping[str, int]


@dataclass(frozen=True)
class Parameter:
    """One parameter of an ensemble, a whole number from `minimum` to `maximum`."""

    name: str
    minimum: int
    maximum: int
    meaning: str


@dataclass(frozen=True)
class Ensemble:
    """An ensemble of orders and its known facts.

    `sampler(elements, generator, **parameters)` draws one order. `region` names the spacetime
    region it is sprinkled into, None where the orders resemble no manifold.
    `ordering_fraction` gives the exact expected ordering fraction of given parameters, where one is known.
    `from_positions(points, threads)` gives the order of stored points back, shape (n, d), sorted by time; it
    raises OrderError for any others. None where orders are not made from points.
    """

    name: str
    sampler: Callable[..., Order]
    parameters: tuple[Parameter, ...]
    meaning: str
    source: str
    region: Literal["diamond", "box"] | None = None
    ordering_fraction: Callable[[Parameters], float] | None = None
    from_positions: Callable[[Points, int], Order] | None = None


DIMENSION = Parameter("dimension", 2, 7, "spacetime dimension, time included")

ENSEMBLES: Mapping[str, Ensemble] = {
    ensemble.name: ensemble
    for ensemble in (
        Ensemble(
            "minkowski-diamond",
            minkowski_diamond,
            (DIMENSION,),
            "uniform sprinkling into a causal diamond of flat spacetime",
            "Bombelli, Lee, Meyer & Sorkin 1987; ordering fraction: Myrheim 1978, Meyer 1988",
            region="diamond",
            from_positions=order_of_positions,
            ordering_fraction=lambda parameters: ordering_fraction_of_diamond(parameters["dimension"]),
        ),
        Ensemble(
            "minkowski-box",
            minkowski_box,
            (DIMENSION,),
            "uniform sprinkling into a unit hypercube of flat spacetime, time along one edge",
            "Bombelli, Lee, Meyer & Sorkin 1987",
            region="box",
            from_positions=order_of_positions,
        ),
        Ensemble(
            "kleitman-rothschild",
            kleitman_rothschild,
            (),
            "three random layers of n/4, n/2, n/4 elements: the typical finite order, no spacetime",
            "Kleitman & Rothschild 1975",
        ),
    )
}

PARAMETER_NAMES: tuple[str, ...] = tuple(
    dict.fromkeys(parameter.name for ensemble in ENSEMBLES.values() for parameter in ensemble.parameters)
)


def sprinkle(ensemble: str, parameters: Parameters, elements: int, generator: np.random.Generator) -> Order:
    """Draw one order of a catalogued ensemble; raises KeyError for a name that is not catalogued."""
    return ENSEMBLES[ensemble].sampler(elements, generator, **parameters)
