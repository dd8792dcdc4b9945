"""Which points of flat spacetime precede which, written straight into the words of a packed relation.

Columns are taken in tiles that stay in the first cache while the 64 rows of a group pass over them.
"""

import numpy as np
from numpy.typing import NDArray

from conetone.kernels import inner, kernel
from conetone.sprinkle.groups import over_groups
from conetone.sprinkle.relation import WORD, PackedRelation, Words, words_of_triangle

Points = NDArray[np.float64]
Coordinates = NDArray[np.float64]

TILE = 8 * WORD


def relation_of_points(positions: Points, threads: int = 1) -> PackedRelation:
    """The relation of points of flat spacetime, shape (n, d), d ≥ 2, sorted by time, unit speed of light.

    i precedes j if i < j and (t_j − t_i)² − (x_j − x_i)² − … ≥ 0, subtracted in the order of coordinates.
    """
    # a copy in any case: numba tells arrays that may be written from others by their type
    columns = np.array(positions.T, order="C")
    words = np.empty(words_of_triangle(len(positions)), dtype=np.uint64)
    over_groups(
        len(positions), threads, lambda first, last: relate_points(columns, *_flags(), words, first, last)
    )
    return PackedRelation(len(positions), words)


def relation_of_light_cones(u: Coordinates, v: Coordinates, threads: int = 1) -> PackedRelation:
    """The relation of points with light-cone coordinates u = t − x, v = t + x, each of shape (n,).

    i precedes j if i < j, u_i ≤ u_j and v_i ≤ v_j: transitive whatever was rounded.
    """
    u, v = u.copy(), v.copy()
    words = np.empty(words_of_triangle(len(u)), dtype=np.uint64)
    over_groups(len(u), threads, lambda first, last: relate_light_cones(u, v, *_flags(), words, first, last))
    return PackedRelation(len(u), words)


def _flags() -> tuple[NDArray[np.uint8], Words]:
    """Room for the flags of a tile, as bytes, and the same as words (views are slow to compile)."""
    flags = np.empty(TILE, dtype=np.uint8)
    return flags, flags.view(np.uint64)


@inner
def _pack(flags: NDArray[np.uint8], eights: Words, later: int, width: int, words: Words) -> None:
    """Pack flags of 0 or 1, those from `later` up to `width`, into words; all others count as 0."""
    flags[:later] = 0
    flags[width:] = 0
    for w in range(words.size):
        word = np.uint64(0)
        for k in range(8):
            # the product gathers the lowest bits of eight bytes in its top byte, first byte lowest
            bits = (eights[8 * w + k] * np.uint64(0x0102040810204080)) >> np.uint64(56)
            word |= bits << np.uint64(8 * k)
        words[w] = word


@kernel("void(float64[:, ::1], uint8[::1], uint64[::1], uint64[::1], int64, int64)")
def relate_points(
    columns: Coordinates, flags: NDArray[np.uint8], eights: Words, words: Words, first: int, last: int
) -> None:
    """Write the words of the row groups from `first` to before `last`; `columns` has shape (d, n)."""
    dimension, elements = columns.shape
    separation = np.empty(TILE)
    row_words = (elements + WORD - 1) // WORD
    position = WORD * (first * row_words - first * (first - 1) // 2)
    for start in range(WORD * first, min(WORD * last, elements), WORD):
        rows = min(WORD, elements - start)
        group_words = row_words - start // WORD
        for tile in range(start, elements, TILE):
            width = min(TILE, elements - tile)
            times = columns[0, tile : tile + width]
            places = columns[1, tile : tile + width]
            tile_words = (width + WORD - 1) // WORD
            for row in range(rows):
                i = start + row
                time, place = columns[0, i], columns[1, i]
                for c in range(width):
                    later, further = times[c] - time, places[c] - place
                    separation[c] = later * later - further * further
                for k in range(2, dimension):
                    others, other = columns[k, tile : tile + width], columns[k, i]
                    for c in range(width):
                        further = others[c] - other
                        separation[c] -= further * further
                for c in range(width):
                    flags[c] = separation[c] >= 0
                at = position + row * group_words + (tile - start) // WORD
                # sorting by time made i < j the same as t_i ≤ t_j
                _pack(flags, eights, max(i + 1 - tile, 0), width, words[at : at + tile_words])
        position += rows * group_words


@kernel("void(float64[::1], float64[::1], uint8[::1], uint64[::1], uint64[::1], int64, int64)")
def relate_light_cones(
    u: Coordinates,
    v: Coordinates,
    flags: NDArray[np.uint8],
    eights: Words,
    words: Words,
    first: int,
    last: int,
) -> None:
    """As `relate_points`, of points given by their light-cone coordinates."""
    elements = u.size
    row_words = (elements + WORD - 1) // WORD
    position = WORD * (first * row_words - first * (first - 1) // 2)
    for start in range(WORD * first, min(WORD * last, elements), WORD):
        rows = min(WORD, elements - start)
        group_words = row_words - start // WORD
        for tile in range(start, elements, TILE):
            width = min(TILE, elements - tile)
            us, vs = u[tile : tile + width], v[tile : tile + width]
            tile_words = (width + WORD - 1) // WORD
            for row in range(rows):
                i = start + row
                own_u, own_v = u[i], v[i]
                for c in range(width):
                    flags[c] = (us[c] >= own_u) & (vs[c] >= own_v)
                at = position + row * group_words + (tile - start) // WORD
                _pack(flags, eights, max(i + 1 - tile, 0), width, words[at : at + tile_words])
        position += rows * group_words
