"""From which size on the two stages beat LAPACK: `python -m pytest tests/bench/test_crossover.py`."""

from time import perf_counter

import numpy as np
import pytest

from conetone.diagonalise.full import CROSSOVER, full_spectrum
from conetone.operators.catalogue import PARTS

SOLVERS = ("lapack", "two-stage")
SIZES = (200, 300, 400, 500, 600, 800, 1000, 1200, 1400, 1600, 2000)


@pytest.mark.parametrize("part", PARTS)
def test_crossover(report, part):
    ratios = []
    for n in SIZES:
        matrix = np.triu(np.random.default_rng(n).random((n, n)) < 0.1, 1).astype(np.float64)
        seconds = {solver: min(timed(matrix, part, solver) for _ in range(3)) for solver in SOLVERS}
        ratios.append(seconds["lapack"] / seconds["two-stage"])
    line = "".join(f"  {n}: {ratio:.2f};" for n, ratio in zip(SIZES, ratios, strict=True))
    report.growth.append(f"LAPACK over two stages, {part}, by n:{line}  taken from {CROSSOVER[part]} on")
    assert ratios[-1] > 1


def timed(matrix, part, solver):
    work = matrix.copy()
    start = perf_counter()
    full_spectrum(work, part, solver=solver, overwrite=True)
    return perf_counter() - start
