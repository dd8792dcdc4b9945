"""Windows and bins of rank: what is read, and that every window is a whole number of bins."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from conetone.fit.windows import Growth, RankBins, Window, WindowRule, bins_of_spectrum, bins_of_windows

ACCEPTED = {
    "n^0.5": (1, 0.5),
    "n^1": (1, 1),
    "1 * n^1": (1, 1),
    "1.5 * n^0.25": (1.5, 0.25),
    "0.25 * n^0.50": (0.25, 0.5),
    "12 * n^0.001": (12, 0.001),
    "007 * n^1.0": (7, 1),
}
REFUSED = [
    "", "n", "n^", "^0.5", "0.5", "n^0", "n^0.0", "n^1.5", "n^-0.5", "0 * n^0.5", "0.0 * n^0.5", "-1 * n^0.5",
    "+1 * n^0.5", "1.5*n^0.25", "1.5 n^0.25", "1.5 *n^0.25", "1.5  * n^0.25", " n^0.5", "n^0.5 ", "n^0.5\n",
    "2. * n^0.5", ".5 * n^0.5", "n^.5", "n^1.", "1e3 * n^0.5", "n^5e-1", "N^0.5", "n**0.5", "n ^ 0.5",
    "inf * n^0.5", "nan * n^0.5", "n^inf", "1,5 * n^0.5", "1_0 * n^0.5", "٣ * n^0.5", "n^0.5 * 2",
    "2 * n^0.5^0.5", "2 * 2 * n^0.5", "sqrt(n)", "0x1 * n^0.5",
]  # fmt: skip


@pytest.mark.parametrize(("text", "expected"), ACCEPTED.items())
def test_growths_that_are_read(text, expected):
    growth = Growth.parse(text)
    assert (growth.coefficient, growth.power) == expected
    for size in (2, 100, 1024):
        assert growth.at(size) == pytest.approx(expected[0] * size ** expected[1], rel=1e-15)


@pytest.mark.parametrize("text", REFUSED)
def test_growths_that_are_refused(text):
    with pytest.raises(ValueError, match=r"^") as caught:
        Growth.parse(text)
    assert str(caught.value) == text


@given(st.floats(1e-8, 1e8), st.floats(1e-6, 1))
def test_growths_survive_their_text(coefficient, power):
    growth = Growth(coefficient, power)
    assert Growth.parse(str(growth)) == growth


def test_rules_grow_at_both_ends_and_respect_the_smallest_rank():
    rule = WindowRule(Growth(0.25, 0.5), Growth(0.5, 0.75))
    assert rule.at(10_000, 2) == Window(25.0, 500.0)
    assert rule.at(16, 2) == Window(2.0, 4.0)
    assert rule.at(16, 1) == Window(1.0, 4.0)
    assert str(rule) == "0.25 * n^0.5 .. 0.5 * n^0.75"


@given(st.floats(1e-3, 1e3), st.floats(0.01, 1), st.floats(1e-3, 1e3), st.floats(0.01, 1))
def test_rules_survive_their_text(low, low_power, high, high_power):
    rule = WindowRule(Growth(low, low_power), Growth(high, high_power))
    assert WindowRule.parse(str(rule)) == rule


@pytest.mark.parametrize("text", ["", "n^0.5", "n^0.5..n^0.75", "n^0.5 .. ", "n^0.5 .. n^2", "a .. n^0.5"])
def test_rules_that_are_refused(text):
    with pytest.raises(ValueError, match=r"^"):
        WindowRule.parse(text)


def test_the_middle_of_a_window_in_log_rank():
    # of 0.25 · 100 and 0.5 · 1000 it is √(25 · 500)
    rule = WindowRule(Growth(0.25, 0.5), Growth(0.5, 0.75))
    assert np.exp(rule.log_rank(10_000)) == pytest.approx(np.sqrt(25 * 500))
    assert np.exp(rule.log_rank(4)) == pytest.approx(2)  # at least


# Ends as they arise: real numbers from 1 on, often whole, sometimes whole but for rounding.
ends = st.one_of(
    st.floats(1, 2000),
    st.integers(1, 2000).map(float),
    st.integers(1, 2000).map(lambda whole: float(np.nextafter(whole, np.inf))),
    st.integers(2, 2000).map(lambda whole: float(np.nextafter(whole, 0))),
)
windows = st.tuples(ends, ends).filter(lambda pair: pair[0] < pair[1]).map(lambda pair: Window(*pair))


def ranks_in(window):
    """Ranks r with first ≤ r < last; an end that is whole but for rounding counts as whole."""

    def at_least(rank, end):
        return rank >= end - 1e-9

    return [r for r in range(1, 2003) if at_least(r, window.first) and not at_least(r, window.last)]


@settings(max_examples=300, deadline=None)
@given(st.lists(windows, min_size=1, max_size=6), st.integers(1, 40))
def test_every_window_is_a_whole_number_of_bins(chosen, count):
    bins = bins_of_windows(chosen, count)
    if bins is None:
        # then no window, nor the stretch between two of them, has a rank
        assert not any(ranks_in(window) for window in chosen)
        return
    for window in chosen:
        inside = bins.inside(window)
        found = [rank for b in range(bins.count)[inside] for rank in range(bins.edges[b], bins.edges[b + 1])]
        assert found == ranks_in(window)
    every = [rank for window in chosen for rank in ranks_in(window)]
    if every:
        assert bins.edges[0] <= min(every)
        assert bins.last >= max(every)


@settings(max_examples=200, deadline=None)
@given(st.floats(1, 100), st.floats(1.5, 100), st.integers(4, 40))
def test_bins_of_one_window_are_even_in_log_rank(first, ratio, count):
    window = Window(first, first * ratio)
    bins = bins_of_windows([window], count)
    if bins is None:
        assert not ranks_in(window)
        return
    assert 1 <= bins.count <= count
    step = ratio ** (1 / count)
    # no bin reaches further than one even step, except to hold the one rank it begins with
    assert all(
        high <= low * step + 1
        for low, high in zip(bins.edges[:-1], bins.edges[1:], strict=True)
        if high > low + 1
    )


def test_windows_of_a_sweep():
    # n = 1024: ends 8, 12.8, 45.25…, 63.36…: three stretches shared out as 2.7 : 7.3 : 1.9 of 12
    windows = [Window(8, 45.25), Window(8, 63.36), Window(12.8, 45.25), Window(12.8, 63.36)]
    bins = bins_of_windows(windows, 12)
    assert bins.edges[0] == 8
    assert {13, 46}.issubset(bins.edges)
    assert bins.edges[-1] == 64
    assert bins.count == 12
    assert bins.inside(windows[0]) == slice(0, bins.edges.index(46))
    assert bins.inside(windows[3]) == slice(bins.edges.index(13), 12)


def test_windows_between_two_ranks_have_no_bins():
    assert bins_of_windows([Window(5.2, 5.9)], 12) is None
    bins = bins_of_windows([Window(5.2, 5.9), Window(5.5, 9)], 12)
    assert bins.inside(Window(5.2, 5.9)) == slice(0, 0)


@pytest.mark.parametrize("edges", [(), (1,), (0, 3), (-1, 3), (2, 2), (3, 2), (1, 5, 5), (1, 5, 4)])
def test_edges_that_do_not_rise_from_one_on_are_refused(edges):
    with pytest.raises(ValueError, match="rising edges from 1 on"):
        RankBins(edges)


rising_edges = st.lists(st.integers(1, 60), min_size=2, max_size=10, unique=True).map(
    lambda edges: RankBins(tuple(sorted(edges)))
)


@settings(max_examples=200, deadline=None)
@given(rising_edges, st.integers(0, 10), st.integers(0, 2**32))
def test_averages_over_bins(bins, spare, seed):
    generator = np.random.default_rng(seed)
    by_rank = generator.normal(size=(2, 3, bins.last + spare))  # ranks beyond the last bin are ignored
    found = bins.average(by_rank)
    assert found.shape == (2, 3, bins.count)
    for b in range(bins.count):
        ranks = range(bins.edges[b], bins.edges[b + 1])
        plain = sum(by_rank[..., rank - 1] for rank in ranks) / len(ranks)
        np.testing.assert_allclose(found[..., b], plain, rtol=1e-12, atol=1e-14)


@settings(max_examples=50, deadline=None)
@given(rising_edges)
def test_a_function_of_rank_is_averaged_as_data_are(bins):
    by_rank = np.log(np.arange(1, bins.last + 1))
    np.testing.assert_array_equal(bins.of(np.log), bins.average(by_rank))
    for b, rank in enumerate(bins.ranks):
        ranks = range(bins.edges[b], bins.edges[b + 1])
        assert rank == pytest.approx(np.prod([r ** (1 / len(ranks)) for r in ranks]), rel=1e-12)


@given(st.integers(1, 3000), st.integers(1, 60))
def test_bins_of_a_whole_spectrum(ranks, count):
    bins = bins_of_spectrum(ranks, count)
    assert bins.edges[0] == 1
    assert bins.last == ranks
    assert bins.count <= count
