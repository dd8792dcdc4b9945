"""Products of a bit-packed matrix and its transpose with blocks of vectors, in one pass over its bits.

The method of Arlazarov, Dinic, Kronrod & Faradzhev (1970), the "four Russians": for each byte of a row, the
sum of the (up to eight) vectors that its bits select is looked up in a table of all 256 sums. For the
transpose, the row's vector is added to the byte's entry of a second table, from which the sums of the eight
bits are gathered at the end.
"""

from concurrent.futures import ThreadPoolExecutor
from typing import Any

import numpy as np
from llvmlite import ir
from numba import types
from numba.extending import intrinsic
from numpy.typing import NDArray

from conetone.kernels import inner, kernel
from conetone.sprinkle.relation import WORD, PackedRelation, Words, words_in_a_row

Floats = NDArray[np.float64]

# Vectors in one pass: one cache line of float64, so that a table of 256 sums takes 16 kB.
WIDTH = 8
BYTES = 8  # in a word
VECTOR, ALIGNED = ir.VectorType(ir.DoubleType(), WIDTH), 8
# Rows for which one word column's tables are kept: many, to pay for building them.
ROWS = 8192
# Word columns of one cache line.
LINE = 8
# Pieces of the matrix with sums of their own, which are added in order: results do not depend on threads.
PIECES = 16


class PackedProduct:
    """M X and Mᵀ X for the matrix M of a packed relation: ones where i → j.

    `apply` may use up to `threads` threads; the result does not depend on their number.
    """

    def __init__(self, relation: PackedRelation, threads: int = 1) -> None:
        self.relation = relation
        self.threads = threads
        self._edges = _edges_of_pieces(relation.elements)

    @property
    def elements(self) -> int:
        """Number of rows n."""
        return self.relation.elements

    def apply(self, block: Floats) -> tuple[Floats, Floats]:
        """M X and Mᵀ X, each of shape (n, p), for X of shape (n, p), row-major."""
        n, p = block.shape
        forward, backward = np.empty((n, p)), np.empty((n, p))
        for start in range(0, p, WIDTH):
            columns = slice(start, min(start + WIDTH, p))
            slab = np.zeros((WORD * words_in_a_row(n), WIDTH))
            slab[:n, : columns.stop - start] = block[:, columns]
            up, down = self._apply_slab(slab)
            forward[:, columns] = up[:n, : columns.stop - start]
            backward[:, columns] = down[:n, : columns.stop - start]
        return forward, backward

    def _apply_slab(self, slab: Floats) -> tuple[Floats, Floats]:
        down = np.zeros_like(slab)

        def part(first: int, stop: int) -> Floats:
            up = np.zeros((WORD * stop, WIDTH))
            _multiply_words(self.relation.words, len(slab) // WORD, first, stop, slab, up, down)
            return up

        total = np.zeros_like(slab)
        spans = list(zip(self._edges[:-1], self._edges[1:], strict=True))
        with ThreadPoolExecutor(self.threads) as pool:
            for (_, stop), up in zip(spans, pool.map(part, *zip(*spans, strict=True)), strict=True):
                total[: WORD * stop] += up
        return total, down


def _edges_of_pieces(elements: int) -> list[int]:
    """Word columns at which the pieces begin and end: equal areas of the triangle, whole cache lines."""
    words = words_in_a_row(elements)
    edges = {min(words, LINE * round(words * (k / PIECES) ** 0.5 / LINE)) for k in range(PIECES)}
    return sorted(edges | {0, words})


@kernel(
    "void(Array(uint64, 1, 'C', readonly=True), int64, int64, int64,"
    " float64[:, ::1], float64[:, ::1], float64[:, ::1])"
)
def _multiply_words(
    words: Words, width: int, first: int, stop: int, x: Floats, up: Floats, down: Floats
) -> None:
    """Add the products with word columns first … stop − 1 of `width` to up (M X) and down (Mᵀ X).

    x and down have 64 · width rows, up has 64 · stop.
    """
    sums = np.zeros((BYTES * 256, WIDTH))
    gathered = np.zeros((BYTES * 256, WIDTH))
    tile = np.empty((LINE, ROWS), dtype=np.uint64)
    for strip in range(first, stop, LINE):
        strip_stop = min(strip + LINE, stop)
        for top in range(0, WORD * strip_stop, ROWS):
            rows = _copy_tile(words, width, strip, strip_stop, top, tile)
            for column in range(strip, strip_stop):
                _fill_sums(x, WORD * column, sums)
                for i in range(rows):
                    word = tile[column - strip, i]
                    if word != 0:
                        _look_up(word, top + i, x, up, sums, gathered)
                _spread(gathered, WORD * column, down)


@inner
def _copy_tile(words: Words, width: int, first: int, stop: int, top: int, tile: Words) -> int:
    """Copy word columns first … stop − 1 of up to ROWS rows from `top`; returns the number of rows.

    Words before the diagonal, which are not stored, are zero. The rows of a packed matrix lie far apart:
    reading them in a loop of its own lets the processor wait for many at once.
    """
    count = 0
    for group in range(top // WORD, min((top + ROWS) // WORD, stop)):
        row_words = width - group
        at = WORD * (group * width - group * (group - 1) // 2) - group
        diagonal = max(first, group)
        rows = min(WORD, (len(words) - at - diagonal - 1) // row_words + 1)  # the last group may have fewer
        for _ in range(rows):
            for column in range(first, diagonal):
                tile[column - first, count] = 0
            for column in range(diagonal, stop):
                tile[column - first, count] = words[at + column]
            at += row_words
            count += 1
    return count


@inner
def _fill_sums(x: Floats, row: int, sums: Floats) -> None:
    """sums[256 k + v] = the sum of the rows row + 8 k + b of x over the bits b of v."""
    # sums[256 k], of no bits, stay zero
    for k in range(BYTES):
        for b in range(8):
            for v in range(256 * k, 256 * k + (1 << b)):
                _add_rows(sums, v + (1 << b), sums, v, x, row + 8 * k + b)


@inner
def _spread(gathered: Floats, row: int, down: Floats) -> None:
    """Add gathered[256 k + v] to row + 8 k + b of down for every bit b of v; leave zeros behind."""
    for k in range(BYTES):
        for b in range(7, -1, -1):
            target = row + 8 * k + b
            for v in range(256 * k, 256 * k + (1 << b)):
                _add_rows(down, target, down, target, gathered, v + (1 << b))
                _add_rows(gathered, v, gathered, v, gathered, v + (1 << b))
    gathered[...] = 0.0


# what the stubs of Numba do not know: an intrinsic is called without its first argument
_in_llvm: Any = intrinsic


def _row(context: Any, builder: Any, kind: Any, array: Any, position: Any) -> Any:
    """Pointer to a row of a row-major array of WIDTH columns, as one vector."""
    data = context.make_array(kind)(context, builder, array).data
    offset = builder.mul(position, ir.IntType(64)(WIDTH))
    return builder.bitcast(builder.gep(data, [offset]), VECTOR.as_pointer())


@_in_llvm  # type: ignore[untyped-decorator]
def _add_rows(typing: Any, target: Any, i: Any, left: Any, j: Any, right: Any, k: Any) -> Any:
    """target[i] = left[j] + right[k], as one vector."""

    def generate(context: Any, builder: Any, signature: Any, arguments: Any) -> Any:
        to, one, other = (
            _row(context, builder, signature.args[a], arguments[a], arguments[a + 1]) for a in (0, 2, 4)
        )
        total = builder.fadd(builder.load(one, align=ALIGNED), builder.load(other, align=ALIGNED))
        builder.store(total, to, align=ALIGNED)
        return context.get_dummy_value()

    return types.void(target, types.int64, left, types.int64, right, types.int64), generate


@_in_llvm  # type: ignore[untyped-decorator]
def _look_up(typing: Any, word: Any, row: Any, x: Any, up: Any, sums: Any, gathered: Any) -> Any:
    """For each byte v ≠ 0 of a word ≠ 0, the k-th: up[row] += sums[256 k + v]; gathered[…] += x[row]."""

    def generate(context: Any, builder: Any, signature: Any, arguments: Any) -> Any:
        word, row, *arrays = arguments
        index = ir.IntType(64)

        def entry(array: int, position: Any) -> Any:
            return _row(context, builder, signature.args[2 + array], arrays[array], position)

        start, loop, end = (builder.append_basic_block(name) for name in ("start", "bytes", "end"))
        builder.branch(start)
        builder.position_at_end(start)
        x_row = builder.load(entry(0, row), align=ALIGNED)
        before = builder.load(entry(1, row), align=ALIGNED)
        builder.branch(loop)
        builder.position_at_end(loop)
        rest, total = builder.phi(index), builder.phi(VECTOR)
        shift = builder.and_(builder.cttz(rest, ir.Constant(ir.IntType(1), 1)), index(0x38))  # 8 k
        byte = builder.and_(builder.lshr(rest, shift), index(0xFF))
        position = builder.add(byte, builder.mul(shift, index(256 // 8)))
        summed = builder.fadd(total, builder.load(entry(2, position), align=ALIGNED))
        slot = entry(3, position)
        builder.store(builder.fadd(builder.load(slot, align=ALIGNED), x_row), slot, align=ALIGNED)
        cleared = builder.and_(rest, builder.not_(builder.shl(index(0xFF), shift)))
        for phi, first, later in ((rest, word, cleared), (total, before, summed)):
            phi.add_incoming(first, start)
            phi.add_incoming(later, loop)
        builder.cbranch(builder.icmp_unsigned("!=", cleared, index(0)), loop, end)
        builder.position_at_end(end)
        builder.store(summed, entry(1, row), align=ALIGNED)
        return context.get_dummy_value()

    return types.void(types.uint64, types.int64, x, up, sums, gathered), generate
