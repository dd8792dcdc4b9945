"""Seconds and memory of one replicate, from its size: for forecasts, `extent: auto` and the memory check.

Seconds, where nothing else is said, were measured on 2026-12-01 on one core whose dgemm runs at 18 GFlop/s.
They are constants, not this machine's: with `extent: auto` they decide which eigenvalues are computed, and a
change of one can change what an existing sweep asks for. tests/sweep/test_extents.py pins the decisions.
"""

from collections.abc import Callable, Sequence
from math import log2

import psutil

from conetone.operators.catalogue import DOMINANCE_ABOVE, spectral_part
from conetone.records.tables import LARGEST_PACKED
from conetone.sprinkle.catalogue import ENSEMBLES
from conetone.sweep.points import OperatorChoice, Point
from conetone.sweep.settings import SpectrumSettings

MIB = 2**20

# One eigenproblem of n = 1000 through LAPACK, seconds.
LAPACK_SECONDS_AT_1000 = {"symmetric": 0.17, "antisymmetric": 0.37}
# From these sizes on, full spectra go through band form, either part in n³ times this: n = 4000 in 7.1 s.
TWO_STAGE_FROM = {"symmetric": 1400, "antisymmetric": 500}
TWO_STAGE_SECONDS = 1.1e-10
# Every singular value, in n³ times this: n = 1000 in 0.37 s, n = 2000, beyond the cache, in 3.7 s.
SINGULAR_SECONDS = 4.2e-10
# Bytes per matrix entry at the peak. LAPACK: the matrix, the sum or difference with its transpose, a copy; of
# singular values the matrix and a copy.
LAPACK_BYTES_AN_ENTRY, TWO_STAGE_BYTES_AN_ENTRY, SINGULAR_BYTES_AN_ENTRY = 24, 8, 16
TWO_STAGE_PANELS_MIB = 64

# Leading spectra. Matrix times vector and transpose times vector, in pairs, for each eigenvalue of one sign:
# 6 at tolerance 1e-6, 7 at 1e-9. One pair with a packed relation, for each of its bytes (16 at n = 100,000:
# 9 ns); one pair by dominance counting, for each n log₂ n (16 at n = 10⁶: 2.7 s).
PAIRS_A_LEADING = 7.0
PACKED_SECONDS_A_BYTE = 9e-9 / 16
DOMINANCE_SECONDS = 8.4e-9
# Keeping the basis orthogonal, for each n count² (about 120 operations, counted); and what takes no matter
# how many, an estimate.
BASIS_SECONDS = 7e-9
LEADING_SECONDS = 0.05
# Vectors of the basis for each eigenvalue of one sign, and besides; looks at the convergence, each an
# eigenproblem of the projection onto them, in their number cubed times this and squared times these bytes.
BASIS_VECTORS_A_LEADING, SPARE_BASIS_VECTORS = 3.2, 48
LOOKS, LOOK_SECONDS, LOOK_BYTES_AN_ENTRY = 6, 2e-9, 100
# Packed relations held at once, as read and in words; a link matrix is one more.
PACKED_COPIES = 2
DOMINANCE_BYTES_AN_ELEMENT = 400

# Relating points, seconds a pair (n = 20,000: 0.33 s); finding links, seconds for each n³ (n = 20,000 in
# four dimensions: 0.3 s).
RELATION_SECONDS = 0.8e-9
LINK_SECONDS = 4e-14
# Bytes per matrix entry while an order without positions is drawn.
DRAWING_BYTES_AN_ENTRY = 4
# Writing a packed relation to a table takes this many times its size, measured at 60 MiB.
WRITING_COPIES = 6

# Starting a job: imports.
START_SECONDS = 1.0
# Of fitting one series and of everything after it.
FIT_SECONDS, CLOSING_SECONDS = 1.5, 8.0
# One replicate of an injection, seconds, and what each of its ranks adds (24 replicates of each of five sizes
# from 256 to 1024: 0.66 s); memory of the sums over cut-offs.
INJECTION_SECONDS, INJECTION_SECONDS_A_RANK = 5e-3, 1.5e-6
INJECTION_MIB = 100
# An eigenvalue as a Python number, in a list, and in arrays.
BYTES_AN_EIGENVALUE = 64
BASE_MIB = 150


def packed_bytes(size: int) -> float:
    """Bytes of one packed relation."""
    return size**2 / 16


def full_seconds(size: int, part: str, solver: str = "auto") -> float:
    """Expected seconds of one full spectrum of a diagonalised part."""
    if part == "singular":
        return SINGULAR_SECONDS * float(size) ** 3
    if solver == "lapack" or (solver == "auto" and size < TWO_STAGE_FROM[part]):
        return LAPACK_SECONDS_AT_1000[part] * float(size / 1000) ** 3
    return TWO_STAGE_SECONDS * float(size) ** 3


def leading_seconds(size: int, count: int, *, dominance: bool, singular: bool = False) -> float:
    """Expected seconds of one leading spectrum, `count` of each sign, or of `count` singular values.

    Those are of a matrix twice as large, whose products take two of the other.
    """
    pair = DOMINANCE_SECONDS * size * log2(size) if dominance else PACKED_SECONDS_A_BYTE * packed_bytes(size)
    vectors = BASIS_SECONDS * size * float(count) ** 2
    looks = LOOKS * LOOK_SECONDS * basis_vectors(count) ** 3
    return LEADING_SECONDS + (1 + singular) * (PAIRS_A_LEADING * count * pair + vectors) + looks


def basis_vectors(count: int) -> float:
    """Vectors of the basis in which `count` eigenvalues of each sign are found, to about one block."""
    return BASIS_VECTORS_A_LEADING * count + SPARE_BASIS_VECTORS


def diagonalise_seconds(point: Point, operator: OperatorChoice, spectrum: SpectrumSettings) -> float:
    """Expected seconds of one spectrum."""
    size, part = point.size, spectral_part(operator.part)
    if spectrum.count is None or spectrum.takes_all(size):
        seconds = full_seconds(size, part, spectrum.solver)
    else:
        by_dominance = _by_dominance(point, operator)
        seconds = leading_seconds(size, spectrum.count, dominance=by_dominance, singular=part == "singular")
    return seconds + (LINK_SECONDS * float(size) ** 3 if operator.matrix == "link" else 0.0)


def diagonalise_mib(point: Point, operator: OperatorChoice, spectrum: SpectrumSettings) -> float:
    """Expected peak memory, MiB, of one spectrum."""
    size = point.size
    if spectrum.count is None or spectrum.takes_all(size):
        return full_mib(size, spectrum.solver, singular=operator.part == "singular")
    copies = PACKED_COPIES + (operator.matrix == "link")
    matrix = (
        DOMINANCE_BYTES_AN_ELEMENT * size if _by_dominance(point, operator) else copies * packed_bytes(size)
    )
    vectors = basis_vectors(spectrum.count)
    length = 2 * size if operator.part == "singular" else size
    return BASE_MIB + (matrix + 8 * length * vectors + LOOK_BYTES_AN_ENTRY * vectors**2) / MIB


def full_mib(size: int, solver: str = "auto", *, singular: bool = False) -> float:
    """Expected peak memory, MiB, of one full spectrum of either self-adjoint part, or of singular values."""
    if singular:
        return BASE_MIB + SINGULAR_BYTES_AN_ENTRY * size**2 / MIB
    if solver == "lapack" or (solver == "auto" and size < min(TWO_STAGE_FROM.values())):
        return BASE_MIB + LAPACK_BYTES_AN_ENTRY * size**2 / MIB
    return BASE_MIB + TWO_STAGE_PANELS_MIB + TWO_STAGE_BYTES_AN_ENTRY * size**2 / MIB


def sprinkle_seconds(point: Point) -> float:
    """Expected seconds of drawing one order, with its height, and its links up to LARGEST_PACKED."""
    size = float(point.size)
    if point.size <= LARGEST_PACKED:
        return 1e-3 + RELATION_SECONDS * size**2 + LINK_SECONDS * size**3
    return RELATION_SECONDS * (size * log2(size) if _in_the_plane(point) else size**2)


def sprinkle_mib(point: Point) -> float:
    """Expected peak memory, MiB, of drawing one order and writing it down."""
    size = point.size
    if not _has_positions(point):
        return BASE_MIB + (DRAWING_BYTES_AN_ENTRY * size**2 + WRITING_COPIES * packed_bytes(size)) / MIB
    if size <= LARGEST_PACKED:
        return BASE_MIB + WRITING_COPIES * packed_bytes(size) / MIB
    relation = 0.0 if _in_the_plane(point) else packed_bytes(size)
    return BASE_MIB + (relation + DOMINANCE_BYTES_AN_ELEMENT * size) / MIB


def fit_mib(eigenvalues: int) -> float:
    """Expected peak memory, MiB, of fitting sizes with at most this many eigenvalues each."""
    return BASE_MIB + BYTES_AN_EIGENVALUE * eigenvalues / MIB


def injection_mib(eigenvalues: int) -> float:
    """Expected peak memory, MiB, of injections into sizes with so many eigenvalues all together."""
    return fit_mib(eigenvalues) + INJECTION_MIB


def injection_seconds(ranks: Sequence[int], replicates: Sequence[int]) -> float:
    """Expected seconds of one injection into sizes with so many ranks and replicates, by both estimators.

    Like the lengths of blocks, which follow from it, it stays as it is.
    """
    each = (
        count * (INJECTION_SECONDS + INJECTION_SECONDS_A_RANK * n)
        for n, count in zip(ranks, replicates, strict=True)
    )
    return sum(each)


def largest_size(mib_of: Callable[[int], float], available_mib: float, too_large: int) -> int:
    """Largest size, below one that is too large, whose memory in `mib_of`, which rises, fits; 0 if none."""
    fits = 0
    while too_large - fits > 1:
        middle = (fits + too_large) // 2
        if mib_of(middle) <= available_mib:
            fits = middle
        else:
            too_large = middle
    return fits


def memory_of_this_machine_mib() -> float:
    """All memory of this machine, MiB."""
    return float(psutil.virtual_memory().total) / MIB


def _has_positions(point: Point) -> bool:
    return ENSEMBLES[point.choice.ensemble].from_positions is not None


def _in_the_plane(point: Point) -> bool:
    """Whether the order is that of points of the plane, which needs no relation in memory."""
    return _has_positions(point) and point.choice.dimension == 2


def _by_dominance(point: Point, operator: OperatorChoice) -> bool:
    # orders that are stored packed come back without their points
    above = max(DOMINANCE_ABOVE, LARGEST_PACKED)
    return operator.matrix == "causal" and point.size > above and _in_the_plane(point)
