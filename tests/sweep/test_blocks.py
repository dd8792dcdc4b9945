"""Blocks: every replicate once, and nothing moves when a sweep grows."""

import pytest
from hypothesis import given
from hypothesis import strategies as st

from conetone.sweep.blocks import LONGEST_BLOCK, TARGET_SECONDS, block_length, blocks_of
from conetone.sweep.cost import LAPACK_SECONDS_AT_1000, full_seconds
from conetone.sweep.points import EnsembleChoice, Point

DIAMOND = EnsembleChoice("minkowski-diamond", (("dimension", 3),), "fixed")
LAYERED = EnsembleChoice("kleitman-rothschild", (), "poisson")

sizes = st.integers(2, 20_000)
replicates = st.integers(1, 3000)


@given(sizes, replicates)
def test_every_replicate_is_in_one_block(size, count):
    blocks = list(blocks_of(Point(DIAMOND, size), count))
    assert [replicate for block in blocks for replicate in block.replicates] == list(range(count))
    assert [block.number for block in blocks] == list(range(len(blocks)))
    lengths = [len(block.replicates) for block in blocks]
    assert set(lengths[:-1]) <= {block_length(Point(DIAMOND, size))}
    assert 1 <= lengths[-1] <= block_length(Point(DIAMOND, size))


@given(sizes, replicates, replicates)
def test_more_replicates_keep_every_full_block(size, count, more):
    point = Point(DIAMOND, size)
    before, after = list(blocks_of(point, count)), list(blocks_of(point, count + more))
    full = [block for block in before if len(block.replicates) == block_length(point)]
    assert after[: len(full)] == full
    # the one that was not full grows in place, under its old name
    for block, grown in zip(before[len(full) :], after[len(full) :], strict=False):
        assert (grown.name, grown.first) == (block.name, block.first)
        assert grown.stop >= block.stop


@given(sizes)
def test_the_length_follows_from_the_size_alone(size):
    assert block_length(Point(DIAMOND, size)) == block_length(Point(LAYERED, size))
    assert 1 <= block_length(Point(DIAMOND, size)) <= LONGEST_BLOCK
    assert block_length(Point(DIAMOND, size)) >= block_length(Point(DIAMOND, size + 1))


@given(sizes)
def test_no_block_takes_much_longer_than_its_target(size):
    point = Point(DIAMOND, size)
    slowest = max(full_seconds(size, part, "lapack") for part in LAPACK_SECONDS_AT_1000)
    assert block_length(point) == 1 or block_length(point) * slowest <= 2 * TARGET_SECONDS


@pytest.mark.parametrize(
    ("size", "length"),
    [
        (64, 500),
        (256, 500),
        (362, 500),
        (512, 500),
        (724, 250),
        (1024, 88),
        (2048, 11),
        (4096, 1),
        (10**6, 1),
    ],
)
def test_lengths_never_change(size, length):
    """Results that exist have these lengths: with others, every order of such a size would be drawn again."""
    assert block_length(Point(DIAMOND, size)) == length


def test_names_are_unique():
    points = [Point(choice, size) for choice in (DIAMOND, LAYERED) for size in (100, 101, 1000)]
    points += [Point(EnsembleChoice(DIAMOND.ensemble, DIAMOND.parameters, "poisson"), 100)]
    points += [Point(EnsembleChoice("minkowski-diamond", (("dimension", 2),), "fixed"), 100)]
    names = [block.name for point in points for block in blocks_of(point, 1200)]
    assert len(set(names)) == len(names)
    # still apart where a file system takes capitals for small letters
    assert len({name.lower() for name in names}) == len(names)


@pytest.mark.parametrize("count", [1, 7, 120])
def test_names_keep_their_order(count):
    names = [block.name for block in blocks_of(Point(DIAMOND, 3000), count)]
    assert sorted(names) == names
    assert names[0].endswith("-b0000")
