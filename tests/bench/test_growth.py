"""Seconds and memory as n grows, each path: `python -m pytest tests/bench/test_growth.py`."""

import numpy as np
import pytest

from tests.bench.measured import measure

SPRINKLE = """
from conetone.sprinkle.minkowski import minkowski_diamond
def draw(n, dimension):
    return minkowski_diamond(n, np.random.default_rng(1), dimension=dimension)
"""
FULL = """
from conetone.diagonalise.full import full_spectrum
from conetone.operators.causal import causal_matrix
full_spectrum(np.zeros((200, 200)), "antisymmetric", solver="two-stage")
"""
LEADING = """
from conetone.diagonalise.leading import leading_spectrum
from conetone.operators.dominance import DominanceProduct
from conetone.operators.packed import PackedProduct
def packed(n):
    return PackedProduct(draw(n, 4).relation)
def dominance(n):
    return DominanceProduct(*draw(n, 2).light_cone)
for product in (packed(500), dominance(500)):
    leading_spectrum(product, "symmetric", 10)
"""
PATHS = {
    "relation, d = 4": (
        SPRINKLE + "draw(100, 4).relation",
        "draw({n}, 4).relation",
        (5000, 10000, 20000, 40000),
    ),
    "links, d = 4": (
        SPRINKLE + "draw(100, 4).links\norder = draw({n}, 4)\norder.relation",
        "order.links",
        (5000, 10000, 20000, 40000),
    ),
    "full, antisymmetric": (
        SPRINKLE + FULL,
        "full_spectrum(causal_matrix(draw({n}, 4)), 'antisymmetric', overwrite=True)",
        (1000, 2000, 4000),
    ),
    "full, symmetric": (
        SPRINKLE + FULL,
        "full_spectrum(causal_matrix(draw({n}, 4)), 'symmetric', overwrite=True)",
        (1000, 2000, 4000),
    ),
    "leading 50, packed, d = 4": (
        SPRINKLE + LEADING,
        "assert leading_spectrum(packed({n}), 'antisymmetric', 50).converged",
        (4000, 8000, 16000, 32000),
    ),
    "leading 50, dominance, d = 2": (
        SPRINKLE + LEADING,
        "assert leading_spectrum(dominance({n}), 'antisymmetric', 50).converged",
        (16000, 32000, 64000, 128000),
    ),
}  # fmt: skip


@pytest.mark.parametrize("path", PATHS)
def test_growth(report, path):
    prepare, code, sizes = PATHS[path]
    found = [measure(prepare.replace("{n}", str(n)), code.replace("{n}", str(n))) for n in sizes]
    columns = [f"{m.seconds:.3g} s, {m.mib:.0f} MiB" for m in found]
    slopes = [np.polyfit(np.log(sizes), np.log(values), 1)[0] for values in (
        [m.seconds for m in found], [m.mib for m in found])]  # fmt: skip
    report.growth.append(
        f"{path:30s}"
        + "".join(f"  n = {n}: {column};" for n, column in zip(sizes, columns, strict=True))
        + f"  slopes {slopes[0]:.2f} (time), {slopes[1]:.2f} (memory)"
    )
    assert 0 < slopes[0] < 4
