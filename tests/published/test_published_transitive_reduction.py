"""Links and height against networkx, an independent implementation, on orders of every ensemble."""

import networkx as nx
import numpy as np
import pytest

from conetone.sprinkle.catalogue import ENSEMBLES, sprinkle


def random_order(ensemble, generator, most_elements):
    parameters = {
        parameter.name: int(generator.integers(parameter.minimum, parameter.maximum + 1))
        for parameter in ENSEMBLES[ensemble].parameters
    }
    return sprinkle(ensemble, parameters, int(generator.integers(0, most_elements + 1)), generator)


def graph_of(order):
    graph = nx.DiGraph()
    graph.add_nodes_from(range(order.elements))
    graph.add_edges_from(np.argwhere(order.relation.dense(np.bool_)).tolist())
    return graph


@pytest.mark.parametrize("ensemble", ENSEMBLES)
def test_links_and_height(ensemble):
    for seed in range(150):
        order = random_order(ensemble, np.random.default_rng(seed), 40 if seed < 140 else 150)
        graph = graph_of(order)
        assert {tuple(pair) for pair in np.argwhere(order.links.dense(np.bool_)).tolist()} == set(
            nx.transitive_reduction(graph).edges
        )
        assert order.height == (nx.dag_longest_path_length(graph) + 1 if order.elements else 0)


@pytest.mark.parametrize("ensemble", ENSEMBLES)
def test_transitive_closure_adds_nothing(ensemble):
    for seed in range(50):
        order = random_order(ensemble, np.random.default_rng([seed, 1]), 40)
        graph = graph_of(order)
        assert set(nx.transitive_closure_dag(graph).edges) == set(graph.edges)
        assert order.is_transitive
