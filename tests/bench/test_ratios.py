"""Speed as ratios measured side by side: `python -m pytest tests/bench/test_ratios.py`."""

from functools import cache
from time import perf_counter

import networkx
import numpy as np
import pytest
from scipy.linalg import eigvalsh

from conetone.diagonalise.full import full_spectrum
from conetone.operators.causal import causal_matrix
from conetone.sprinkle.bits import links_of
from conetone.sprinkle.lightcone import relation_of_points
from conetone.sprinkle.minkowski import diamond_points, minkowski_diamond
from tests.bench.measured import measure

SECONDS = {}


def points(n, dimension):
    drawn = diamond_points(n, np.random.default_rng(1), dimension)
    return drawn[np.argsort(drawn[:, 0])]


@cache
def matrix(n):
    return causal_matrix(minkowski_diamond(n, np.random.default_rng(1), dimension=4))


def add_ratio(report, work, ours, theirs, against, asked, unit="s"):
    ratio = theirs / ours
    report.ratios.append(
        (
            work,
            f"{ours:.3g} {unit}",
            f"{against}: {theirs:.3g} {unit}",
            f"{ratio:.3g}",
            f"≥ {asked}" + missed(ratio < asked),
        )
    )
    return ratio


def missed(is_missed):
    return ", missed" if is_missed else ""


@pytest.mark.parametrize(
    ("part", "against", "asked"),
    [("antisymmetric", "eigvalsh(1j * A)", 6), ("symmetric", "eigvalsh(A)", 1.8)],
)
def test_full_spectrum(once, report, part, against, asked):
    c, n = matrix(4000), 4000
    reference = c + c.T if part == "symmetric" else 1j * (c - c.T)
    start = np.random.default_rng(0).random((200, 200))
    full_spectrum(start, part, solver="two-stage")  # loads kernels
    expected, theirs = timed(lambda: eigvalsh(reference))
    found, ours = once(full_spectrum, c, part, rounds=2, warm=False)
    assert np.abs(found.eigenvalues - expected).max() < 20 * n * 2.3e-16 * expected[-1]
    SECONDS[part] = ours
    assert add_ratio(report, f"full, {part}, n = {n}", ours, theirs, against, asked) > 1


@pytest.mark.parametrize("part", ["antisymmetric", "symmetric"])
def test_full_spectrum_against_its_operation_count(once, report, part):
    n = 8000
    c = matrix(n).copy()
    rate = dgemm_rate()
    _, ours = once(lambda: full_spectrum(c, part, overwrite=True), warm=False)
    counted = 4 / 3 * n**3 / rate
    report.ratios.append(
        (
            f"full, {part}, n = {n}",
            f"{ours:.3g} s",
            f"4/3 n³ at dgemm's {rate / 1e9:.1f} GFlop/s: {counted:.3g} s",
            f"{ours / counted:.2f}",
            "≤ 2" + missed(ours > 2 * counted),
        )
    )


def dgemm_rate(n=3000):
    a = np.random.default_rng(0).random((n, n))
    return 2 * n**3 / min(timed(lambda: a @ a)[1] for _ in range(3))


def timed(call):
    start = perf_counter()
    result = call()
    return result, perf_counter() - start


LEADING = """
from conetone.diagonalise.leading import leading_spectrum
from conetone.operators.packed import PackedProduct
from conetone.sprinkle.minkowski import minkowski_diamond
def leading(n, count, tolerance):
    order = minkowski_diamond(n, np.random.default_rng(1), dimension=4)
    return leading_spectrum(PackedProduct(order.relation), "symmetric", count, tolerance=tolerance)
leading(600, 10, 1e-9)
"""
EIGSH = """
from scipy.sparse.linalg import eigsh
from conetone.operators.causal import causal_matrix
from conetone.sprinkle.minkowski import minkowski_diamond
order = minkowski_diamond(8000, np.random.default_rng(1), dimension=4)
order.relation
start = np.random.default_rng(0).standard_normal(8000)
"""


def test_leading_spectrum(once, report):
    n, count = 8000, 100
    theirs = measure(
        EIGSH,
        "c = order.relation.dense(np.float64)\na = c + c.T\ndel c\n"
        f"values = eigsh(a, k={2 * count}, which='BE', tol=1e-9, v0=start, return_eigenvectors=False)\n"
        "result = sorted(values)",
    )
    ours, _ = once(
        lambda: measure(
            LEADING, f"found = leading({n}, {count}, 1e-9)\nresult = [found.converged, *found.eigenvalues]"
        ),
        warm=False,
    )
    converged, *eigenvalues = ours.result
    assert converged
    np.testing.assert_allclose(eigenvalues, theirs.result, atol=2e-9 * eigenvalues[-1], rtol=0)
    work = f"leading {count} of each sign, n = {n}, d = 4"
    assert add_ratio(report, work, ours.seconds, theirs.seconds, "eigsh, dense", 5) > 1
    assert add_ratio(report, f"{work}: memory", ours.mib, theirs.mib, "eigsh, dense", 30, "MiB") > 1


def test_relation(once, report):
    sorted_points = points(8000, 4)
    expected, theirs = timed(lambda: broadcast(sorted_points))
    relation, ours = once(relation_of_points, sorted_points, rounds=5)
    assert (relation.dense(np.bool_) == expected).all()
    assert add_ratio(report, "relation, n = 8000, d = 4", ours, theirs, "NumPy broadcasting", 20) > 1


def broadcast(p):
    t, x = p[:, 0], p[:, 1:]
    apart = ((x[:, None, :] - x[None, :, :]) ** 2).sum(axis=-1)
    later = t[None, :] - t[:, None]
    return np.triu(later**2 >= apart, 1)


def test_links(once, report):
    order = minkowski_diamond(4000, np.random.default_rng(1), dimension=4)
    dense = order.relation.dense(np.bool_)
    graph = networkx.DiGraph(list(zip(*np.nonzero(dense), strict=True)))
    reduced, graphs = timed(lambda: networkx.transitive_reduction(graph))
    product, products = timed(lambda: dense & ~((f := dense.astype(np.float32)) @ f > 0))
    links, ours = once(links_of, order.relation, rounds=5)
    assert (links.dense(np.bool_) == product).all()
    assert links.pairs == reduced.number_of_edges()
    assert add_ratio(report, "links, n = 4000, d = 4", ours, graphs, "networkx", 500) > 1
    assert add_ratio(report, "links, n = 4000, d = 4", ours, products, "float32 product", 5) > 1
