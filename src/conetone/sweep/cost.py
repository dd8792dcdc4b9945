"""Seconds and memory of one replicate, from its size: for block lengths, forecasts and the memory check.

Constants measured on one core at n = 1024; they set job lengths and time forecasts,
never a number in a table.
"""

import psutil

from conetone.sweep.points import OperatorChoice

MIB = 2**20

# One eigenproblem of n = 1000 through LAPACK, seconds.
SECONDS_AT_1000 = {"symmetric": 0.11, "antisymmetric": 0.21}
# Sprinkling, links and height of n = 1000, seconds.
SPRINKLE_SECONDS_AT_1000 = 0.05
# Starting a job: imports.
START_SECONDS = 1.0
# Of fitting one series and of everything after it.
FIT_SECONDS, CLOSING_SECONDS = 1.5, 8.0
# Bytes per matrix entry at the peak: the matrix, its transpose's sum or difference, and LAPACK's copy.
BYTES_AN_ENTRY = 24
SPRINKLE_BYTES_AN_ENTRY = 9
# An eigenvalue as a Python number, in a list, and in arrays.
BYTES_AN_EIGENVALUE = 64
BASE_MIB = 150


def diagonalise_seconds(size: int, operator: OperatorChoice) -> float:
    """Expected seconds of one full spectrum."""
    return SECONDS_AT_1000[operator.part] * float(size / 1000) ** 3


def sprinkle_seconds(size: int) -> float:
    """Expected seconds of drawing one order, with its links and height."""
    return 1e-3 + SPRINKLE_SECONDS_AT_1000 * float((size / 1000) ** 2.5)


def diagonalise_mib(size: int) -> float:
    """Expected peak memory, MiB, of one full spectrum of either part."""
    return BASE_MIB + BYTES_AN_ENTRY * size**2 / MIB


def sprinkle_mib(size: int) -> float:
    """Expected peak memory, MiB, of drawing one order: links take dense float32 and boolean matrices."""
    return BASE_MIB + SPRINKLE_BYTES_AN_ENTRY * size**2 / MIB


def fit_mib(eigenvalues: int) -> float:
    """Expected peak memory, MiB, of fitting sizes with at most this many eigenvalues each."""
    return BASE_MIB + BYTES_AN_EIGENVALUE * eigenvalues / MIB


def largest_size(available_mib: float) -> int:
    """Largest size whose full spectrum fits."""
    return int((max(available_mib - BASE_MIB, 0) * MIB / BYTES_AN_ENTRY) ** 0.5)


def memory_of_this_machine_mib() -> float:
    """All memory of this machine, MiB."""
    return float(psutil.virtual_memory().total) / MIB
