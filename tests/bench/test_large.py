"""The largest spectra, seconds and MiB of a process: `python -m pytest tests/bench/test_large.py`."""

import pytest

from tests.bench.measured import measure

PREPARE = """
import time
from conetone.diagonalise.leading import leading_spectrum
from conetone.operators.catalogue import OPERATORS
from conetone.sprinkle.minkowski import diamond_points, order_of_points
def spectrum(n, dimension, count, tolerance):
    points = diamond_points(n, np.random.default_rng(1), dimension)
    product = OPERATORS["causal"].product(order_of_points(points, threads=2), 2)
    return leading_spectrum(product, "{part}", count, tolerance=tolerance)
"""
CODE = "found = spectrum({n}, {d}, {count}, {tolerance})\nresult = [found.converged, found.products]"


@pytest.mark.parametrize(
    ("n", "dimension", "count", "part", "seconds", "mib"),
    [
        (100_000, 4, 200, "antisymmetric", 240, 3 * 1024),
        (100_000, 4, 200, "symmetric", 240, 3 * 1024),
        (1_000_000, 2, 100, "antisymmetric", 1200, 6 * 1024),
    ],
)
def test_leading_spectrum(report, n, dimension, count, part, seconds, mib):
    code = CODE.format(n=n, d=dimension, count=count, tolerance=1e-6)
    found = measure(PREPARE.replace("{part}", part), code)
    converged, products = found.result
    assert converged
    work = f"leading {count}, {part}, n = {n}, d = {dimension}, 2 cores"
    report.ratios.append(
        (work, f"{found.seconds:.0f} s", f"{products} products", "", limit(found.seconds, seconds, "s"))
    )
    report.ratios.append((f"{work}: memory", f"{found.mib:.0f} MiB", "", "", limit(found.mib, mib, "MiB")))


def limit(found, most, unit):
    return f"≤ {most} {unit}" + (", missed" if found > most else "")
