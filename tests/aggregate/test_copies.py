"""Layout of jackknife copies, and errors made of them."""

import numpy as np
import pytest

from conetone.aggregate.resample import Candidate, Measured, measure, stack_copies
from conetone.aggregate.scaling import Averages
from conetone.fit.powerlaw import Estimates


def marked_estimates(mark, replicates):
    """Estimates whose every number tells where it is from."""
    entries = mark + np.arange(1 + replicates)
    return Estimates(entries + 0.1, entries + 0.2, entries + 0.3, entries + 0.4)


def test_every_copy_misses_one_replicate_of_one_size():
    sizes, replicates = [10, 20, 40], [2, 3, 2]
    marks = [[1000, 2000, 3000], [4000, None, 6000]]
    candidates = [
        Candidate(
            2 + c,
            [
                None if mark is None else marked_estimates(mark, m)
                for mark, m in zip(row, replicates, strict=True)
            ],
            [c, c + 1, c + 2],
        )
        for c, row in enumerate(marks)
    ]
    found = stack_copies(sizes, replicates, candidates)
    names = {"exponent": 0.1, "statistical": 0.2, "misfit": 0.3, "chi2": 0.4}
    left_out = [None, *((s, i) for s, count in enumerate(replicates) for i in range(count))]
    for name, offset in names.items():
        array = getattr(found, name)
        assert array.shape == (8, 3, 2)
        for copy, out in enumerate(left_out):
            for c, row in enumerate(marks):
                for s, mark in enumerate(row):
                    if mark is None:
                        assert np.isnan(array[copy, s, c])
                        continue
                    entry = 1 + out[1] if out is not None and out[0] == s else 0
                    assert array[copy, s, c] == mark + entry + offset
    np.testing.assert_array_equal(found.sizes, sizes)
    np.testing.assert_array_equal(found.parameters, [2, 3])
    np.testing.assert_array_equal(found.bins_cut, [[0, 1], [1, 2], [2, 3]])


@pytest.mark.parametrize("replicates", [[2], [5, 3], [4, 1, 6], [2, 2, 2, 2]])
def test_errors_are_a_jackknife_of_each_size_added_up(replicates):
    generator = np.random.default_rng(len(replicates))
    copies = 1 + sum(replicates)
    averages = Averages(generator.normal(size=(copies, 3)), generator.uniform(0, 2, size=(copies, 3)))
    found = measure(averages, replicates)
    for point in range(3):
        variance, first = 0.0, 1
        for count in replicates:
            own = averages.value[first : first + count, point].tolist()
            mean = sum(own) / count
            variance += (count - 1) / count * sum((copy - mean) ** 2 for copy in own)
            first += count
        assert found.statistical[point] == pytest.approx(variance**0.5, rel=1e-12)
        assert found.systematic[point] == pytest.approx(averages.hidden_variance[0, point] ** 0.5)
        assert found.value[point] == averages.value[0, point]
    np.testing.assert_array_equal(found.copies, averages.value[1:])


def test_of_a_sum_of_means_the_error_is_in_quadrature():
    # value = Σ_s mean of sample s: the standard errors of independent means add in quadrature
    generator = np.random.default_rng(1)
    samples = [generator.normal(size=count) for count in (6, 9, 4)]
    copies = [
        sum(np.delete(x, i).mean() if x is sample else x.mean() for x in samples)
        for sample in samples
        for i in range(len(sample))
    ]
    value = np.array([[sum(x.mean() for x in samples)], *([copy] for copy in copies)])
    found = measure(Averages(value, np.zeros_like(value)), [len(x) for x in samples])
    expected = np.sqrt(sum(x.var(ddof=1) / len(x) for x in samples))
    assert found.statistical[0] == pytest.approx(expected, rel=1e-12)


def test_the_total_error_is_in_quadrature():
    zero = np.zeros((0, 2))
    found = Measured(np.array([1.0, 2]), np.array([3.0, 5]), np.array([4.0, 12]), zero)
    np.testing.assert_allclose(found.total, [5, 13])
