"""Packed relations: round trips, layout, refusals."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from conetone.errors import OrderError
from conetone.sprinkle.relation import WORD, PackedRelation, words_in_a_row, words_of_triangle


def random_relation(elements, seed, density=0.5):
    return np.triu(np.random.default_rng([elements, seed]).random((elements, elements)) < density, 1)


def plain_words(matrix):
    """The documented layout, bit by bit: row i holds the columns from 64 · (i // 64) on, lowest bit first."""
    words = []
    for i, row in enumerate(matrix):
        columns = row[WORD * (i // WORD) :].tolist()
        words += [
            sum(1 << bit for bit, set_ in enumerate(columns[start : start + WORD]) if set_)
            for start in range(0, len(columns), WORD)
        ]
    return words


@pytest.mark.parametrize("elements", range(201))
def test_round_trips_at_every_size(elements):
    matrix = random_relation(elements, 0)
    relation = PackedRelation.from_matrix(matrix)
    np.testing.assert_array_equal(relation.dense(np.bool_), matrix)
    assert relation.pairs == matrix.sum()
    again = PackedRelation.from_bytes(elements, relation.to_bytes())
    np.testing.assert_array_equal(again.words, relation.words)
    np.testing.assert_array_equal(again.dense(np.bool_), matrix)


@settings(max_examples=100, deadline=None)
@given(st.integers(0, 200), st.integers(0, 2**32), st.sampled_from([0.0, 0.01, 0.5, 0.99, 1.0]))
def test_round_trips_of_any_density(elements, seed, density):
    matrix = random_relation(elements, seed, density)
    relation = PackedRelation.from_matrix(matrix)
    np.testing.assert_array_equal(relation.dense(np.bool_), matrix)
    np.testing.assert_array_equal(
        PackedRelation.from_bytes(elements, relation.to_bytes()).words, relation.words
    )


@pytest.mark.parametrize("elements", [0, 1, 2, 63, 64, 65, 127, 128, 129, 200])
def test_layout(elements):
    matrix = random_relation(elements, 1)
    relation = PackedRelation.from_matrix(matrix)
    expected = plain_words(matrix)
    assert relation.words.tolist() == expected
    assert words_of_triangle(elements) == len(expected)
    assert relation.to_bytes() == b"".join(word.to_bytes(8, "little") for word in expected)


@pytest.mark.parametrize("elements", [0, 1, 64, 65, 150])
def test_row_groups(elements):
    matrix = random_relation(elements, 2)
    groups = list(PackedRelation.from_matrix(matrix).row_groups())
    assert [start for start, _ in groups] == list(range(0, elements, WORD))
    for start, rows in groups:
        np.testing.assert_array_equal(rows, matrix[start : start + WORD])
    from_groups = PackedRelation.from_row_groups(elements, (rows for _, rows in groups))
    np.testing.assert_array_equal(from_groups.dense(np.bool_), matrix)


@pytest.mark.parametrize("dtype", [np.bool_, np.float32, np.float64])
def test_dense_of_a_type(dtype):
    matrix = random_relation(70, 3)
    dense = PackedRelation.from_matrix(matrix).dense(dtype)
    assert dense.dtype == dtype
    np.testing.assert_array_equal(dense, matrix.astype(dtype))


def test_triangle_takes_little_more_than_half():
    # n²/16 bytes, as the module says, and less than a word at either end of a row on top
    for elements in (1024, 10_000):
        assert elements**2 / 16 <= 8 * words_of_triangle(elements) < elements**2 / 16 + 16 * elements
        assert words_in_a_row(elements) == int(np.ceil(elements / 64))


def test_pairs_on_or_below_the_diagonal_are_refused():
    for elements in (1, 2, 5, 65):
        for i in range(elements):
            for j in {0, i // 2, i}:
                matrix = random_relation(elements, 4)
                matrix[i, j] = True
                with pytest.raises(OrderError, match=f"element {i} before element {j}") as caught:
                    PackedRelation.from_matrix(matrix)
                assert "natural labelling" in caught.value.allowed


@pytest.mark.parametrize("shape", [(3,), (2, 3), (3, 2), (2, 2, 2), (0, 1)])
def test_arrays_that_are_no_square_matrix_are_refused(shape):
    with pytest.raises(OrderError, match="a square matrix"):
        PackedRelation.from_matrix(np.zeros(shape, dtype=bool))


def test_words_of_a_wrong_number_or_type_are_refused():
    for elements in (0, 1, 64, 65):
        right = words_of_triangle(elements)
        for wrong in {0, right - 1, right + 1} - {right, -1}:
            with pytest.raises(OrderError, match="words"):
                PackedRelation(elements, np.zeros(wrong, dtype=np.uint64))
        with pytest.raises(OrderError, match="int64 words"):
            PackedRelation(elements, np.zeros(right, dtype=np.int64))
        with pytest.raises(OrderError, match="words"):
            PackedRelation(elements, np.zeros((right, 1), dtype=np.uint64))


def test_bytes_of_a_wrong_length_are_refused():
    data = PackedRelation.from_matrix(random_relation(70, 5)).to_bytes()
    for wrong in (data[:-1], data[:-8], data + b"\0", data + bytes(8), b""):
        with pytest.raises(OrderError, match="packed relation"):
            PackedRelation.from_bytes(70, wrong)
    with pytest.raises(OrderError, match="whole number of 8-byte words"):
        PackedRelation.from_bytes(70, data[:-3])


def test_words_are_read_only():
    relation = PackedRelation.from_matrix(random_relation(10, 6))
    with pytest.raises(ValueError, match="read-only"):
        relation.words[0] = 1
