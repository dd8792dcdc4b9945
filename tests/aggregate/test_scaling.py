"""Extrapolation: exact where the answer is known, and against the same average written as loops."""

import numpy as np
import pytest

from conetone.aggregate.scaling import SizeEstimates, average_at_sizes, extrapolate

SIZES = np.array([250.0, 500, 1000, 2000, 4000])


def estimates_of(exponent, statistical=0.01, misfit=0.0, chi2=5.0, bins_cut=0.0, parameters=2.0, sizes=SIZES):
    """Estimates of shape (copies, sizes, candidates); every other argument is spread over that shape."""
    exponent = np.asarray(exponent, dtype=float)
    fitted = np.where(np.isfinite(exponent), 1.0, np.nan)
    return SizeEstimates(
        sizes=sizes,
        exponent=exponent,
        statistical=statistical * fitted,
        misfit=misfit * fitted,
        chi2=chi2 * fitted,
        bins_cut=np.broadcast_to(bins_cut, exponent.shape[1:]).astype(float),
        parameters=np.broadcast_to(parameters, exponent.shape[2:]).astype(float),
    )


def law(limit, amplitude, omega, sizes=SIZES):
    """α(n) = α∞ + a n^−ω as one copy of one candidate."""
    return (limit + amplitude * sizes**-omega)[np.newaxis, :, np.newaxis]


@pytest.mark.parametrize("omega", [0.25, 0.5, 0.75, 1.0, 2.0])
@pytest.mark.parametrize("cut", [0, 1, 2])
def test_one_true_omega_is_exact(omega, cut):
    for limit, amplitude in ((0.75, 3.0), (1.0, -2.0), (0.6, 0.0)):
        curve = np.array([100.0, 1000.0, np.inf])
        found = extrapolate(estimates_of(law(limit, amplitude, omega)), [omega], cut)
        assert found.limit.value[0, 0] == pytest.approx(limit, abs=1e-12)
        expected = [limit + amplitude * size**-omega for size in curve]
        assert found.at(curve).value[0] == pytest.approx(expected, abs=1e-11)
        assert found.reduced_chi2 == pytest.approx(0, abs=1e-15)
        assert found.omega_weights == pytest.approx([1])
        assert found.weights == pytest.approx([1])
        assert found.at_sizes.value[0] == pytest.approx(limit + amplitude * SIZES**-omega, rel=1e-12)
        # without misfit nothing is hidden but the spread, and there is none
        assert found.limit.hidden_variance[0, 0] == pytest.approx(0, abs=1e-15)


def test_of_several_omegas_the_value_lies_between_and_the_spread_is_systematic():
    estimates = estimates_of(law(0.75, 3.0, 0.75))
    omegas = [0.5, 0.75, 1.0]
    single = [extrapolate(estimates, [omega], 0).limit.value[0, 0] for omega in omegas]
    found = extrapolate(estimates, omegas, 0)
    assert min(single) < found.limit.value[0, 0] < max(single)
    assert found.omega_weights.sum() == pytest.approx(1)
    assert found.omega_weights.argmax() == 1  # the true ω has no χ²
    weighted = found.omega_weights @ single
    assert found.limit.value[0, 0] == pytest.approx(weighted, rel=1e-12)
    spread = found.omega_weights @ (np.array(single) - weighted) ** 2
    assert found.limit.hidden_variance[0, 0] >= spread > 0


def test_the_true_omega_dominates_when_errors_are_small():
    found = extrapolate(estimates_of(law(0.75, 3.0, 0.75), statistical=1e-5), [0.5, 0.75, 1.0], 0)
    assert found.omega_weights == pytest.approx([0, 1, 0], abs=1e-12)
    assert found.limit.value[0, 0] == pytest.approx(0.75, abs=1e-10)


@pytest.mark.parametrize("usable", [0, 1, 2])
def test_fewer_than_three_sizes_are_not_extrapolated(usable):
    exponent = law(0.75, 1.0, 0.5)
    exponent[:, : len(SIZES) - usable] = np.nan
    assert extrapolate(estimates_of(exponent), [0.5], 2) is None
    averages = average_at_sizes(estimates_of(exponent))
    assert np.isnan(averages.value[0]).tolist() == [True] * (len(SIZES) - usable) + [False] * usable


def test_a_candidate_without_a_fit_at_the_largest_size_has_no_weight():
    exponent = np.concatenate([law(0.75, 1.0, 0.5), law(5.0, 0.0, 0.5)], axis=2)
    exponent[:, -1, 1] = np.nan
    found = extrapolate(estimates_of(exponent), [0.5], 0)
    assert found.weights == pytest.approx([1, 0])
    assert found.limit.value[0, 0] == pytest.approx(0.75, abs=1e-12)


def test_a_candidate_that_never_fits_changes_nothing():
    exponent = law(0.75, 1.0, 0.5)
    with_nan = np.concatenate([exponent, np.full_like(exponent, np.nan)], axis=2)
    alone = extrapolate(estimates_of(exponent), [0.5, 1], 2)
    both = extrapolate(estimates_of(with_nan), [0.5, 1], 2)
    assert both.limit.value[0, 0] == pytest.approx(alone.limit.value[0, 0], rel=1e-13)
    assert both.limit.hidden_variance[0, 0] == pytest.approx(alone.limit.hidden_variance[0, 0], rel=1e-12)


def test_the_smallest_sizes_are_cut_one_by_one():
    # a law that holds from the third size on; the first two are far off and each costs χ² to keep
    exponent = law(0.75, 2.0, 0.5)
    exponent[:, :2] += 0.5
    found = extrapolate(estimates_of(exponent), [0.5], 2)
    assert found.limit.value[0, 0] == pytest.approx(0.75, abs=1e-9)
    kept = extrapolate(estimates_of(exponent), [0.5], 1)
    assert abs(kept.limit.value[0, 0] - 0.75) > 0.05


def plain_criterion(estimates, copy, c):
    """χ² + 2 k + 2 n_cut, averaged over sizes; ∞ without a fit at the largest."""
    fitted = [s for s in range(len(estimates.sizes)) if np.isfinite(estimates.exponent[copy, s, c])]
    if len(estimates.sizes) - 1 not in fitted:
        return np.inf
    return np.mean(
        [
            estimates.chi2[copy, s, c] + 2 * estimates.parameters[c] + 2 * estimates.bins_cut[s, c]
            for s in fitted
        ]
    )


def plain_lines(estimates, copy, omegas, most_cut):
    """Every straight line: (information criterion, candidate, its prediction function)."""
    for c in range(len(estimates.parameters)):
        for omega in omegas:
            sets_of_sizes = {
                tuple(
                    s for s in range(cut, len(estimates.sizes)) if np.isfinite(estimates.exponent[copy, s, c])
                )
                for cut in range(most_cut + 1)
            }
            for used in (list(sizes) for sizes in sorted(sets_of_sizes) if len(sizes) >= 3):
                alpha = estimates.exponent[copy, used, c]
                statistical = estimates.statistical[copy, used, c] ** 2
                total = statistical + estimates.misfit[copy, used, c] ** 2
                design = np.column_stack([np.ones(len(used)), estimates.sizes[used] ** -omega])
                precision = np.diag(1 / total)
                gain = np.linalg.inv(design.T @ precision @ design) @ design.T @ precision
                parameters = gain @ alpha
                chi2 = ((alpha - design @ parameters) ** 2 / total).sum()
                widening = max(chi2 / (len(used) - 2), 1)

                def predict(
                    size,
                    omega=omega,
                    gain=gain,
                    parameters=parameters,
                    widening=widening,
                    total=total,
                    statistical=statistical,
                ):
                    row = np.array([1, size**-omega])
                    functional = row @ gain
                    variance = widening * functional**2 @ total - functional**2 @ statistical
                    return row @ parameters, max(variance, 0)

                unused = len(estimates.sizes) - len(used)
                yield plain_criterion(estimates, copy, c) + chi2 + 2 * unused, c, predict


def plain_extrapolation(estimates, copy, omegas, most_cut, size):
    """Value, hidden variance, and weights of the candidates."""
    lines = list(plain_lines(estimates, copy, omegas, most_cut))
    lowest = min(criterion for criterion, _, _ in lines)
    raw = [np.exp(-(criterion - lowest) / 2) for criterion, _, _ in lines]
    weights = [r / sum(raw) for r in raw]
    predictions = [predict(size) for _, _, predict in lines]
    value = sum(w * p for w, (p, _) in zip(weights, predictions, strict=True))
    hidden = sum(w * (v + (p - value) ** 2) for w, (p, v) in zip(weights, predictions, strict=True))
    shares = [0.0] * len(estimates.parameters)
    for weight, (_, c, _) in zip(weights, lines, strict=True):
        shares[c] += weight
    return value, hidden, shares


def random_estimates(seed):
    generator = np.random.default_rng(seed)
    copies, sizes, candidates = 4, int(generator.integers(3, 7)), int(generator.integers(1, 6))
    shape = (copies, sizes, candidates)
    ladder = 200.0 * 1.5 ** np.arange(sizes)
    exponent = 0.75 + 2 * ladder[:, np.newaxis] ** -0.6 + 0.02 * generator.normal(size=shape)
    missing = generator.random((sizes, candidates)) < 0.15
    missing[:, 0] = False
    exponent[:, missing] = np.nan
    return estimates_of(
        exponent,
        statistical=generator.uniform(0.005, 0.03, shape),
        misfit=generator.uniform(0, 0.03, shape),
        chi2=generator.chisquare(4, shape),
        bins_cut=generator.integers(0, 4, shape[1:]),
        parameters=generator.integers(2, 4, candidates),
        sizes=ladder,
    )


def test_against_loops():
    omegas, most_cut = [0.5, 0.75, 1.0], 2
    for seed in range(60):
        estimates = random_estimates(seed)
        curve = np.array([estimates.sizes[0], 5000.0, np.inf])
        found = extrapolate(estimates, omegas, most_cut)
        for copy in range(len(estimates.exponent)):
            for at, size in enumerate(curve):
                value, hidden, shares = plain_extrapolation(estimates, copy, omegas, most_cut, size)
                assert found.at(curve).value[copy, at] == pytest.approx(value, rel=1e-9)
                assert found.at(curve).hidden_variance[copy, at] == pytest.approx(hidden, rel=1e-7, abs=1e-14)
            assert found.limit.value[copy, 0] == found.at(curve).value[copy, -1]
            if copy == 0:
                assert found.weights == pytest.approx(shares, abs=1e-10)


def test_averages_at_each_size_against_loops():
    for seed in range(60):
        estimates = random_estimates(seed)
        found = average_at_sizes(estimates)
        for copy in range(len(estimates.exponent)):
            for s in range(len(estimates.sizes)):
                used = [
                    c
                    for c in range(len(estimates.parameters))
                    if np.isfinite(estimates.exponent[copy, s, c])
                    and np.isfinite(plain_criterion(estimates, copy, c))
                ]
                criteria = np.array([plain_criterion(estimates, copy, c) for c in used])
                weights = np.exp(-(criteria - criteria.min()) / 2)
                weights /= weights.sum()
                value = weights @ estimates.exponent[copy, s, used]
                hidden = weights @ (
                    estimates.misfit[copy, s, used] ** 2 + (estimates.exponent[copy, s, used] - value) ** 2
                )
                assert found.value[copy, s] == pytest.approx(value, rel=1e-10)
                assert found.hidden_variance[copy, s] == pytest.approx(hidden, rel=1e-8, abs=1e-15)


def test_misfit_is_systematic_and_not_statistical():
    small, large = (
        extrapolate(estimates_of(law(0.75, 1, 0.5), misfit=misfit), [0.5], 0) for misfit in (0.01, 0.02)
    )
    # α∞ is a fixed linear functional here: its variance from misfits is four times as large
    assert large.limit.hidden_variance[0, 0] == pytest.approx(4 * small.limit.hidden_variance[0, 0], rel=1e-9)


def test_a_line_that_does_not_fit_widens_its_own_error():
    bent = law(0.75, 1.0, 0.5)
    bent[0, :, 0] += 0.05 * np.array([1, -1, 1, -1, 1])
    found = extrapolate(estimates_of(bent, statistical=0.01), [0.5], 0)
    assert found.reduced_chi2 > 10
    straight = extrapolate(estimates_of(law(0.75, 1, 0.5), statistical=0.01), [0.5], 0)
    assert straight.limit.hidden_variance[0, 0] == pytest.approx(0, abs=1e-15)
    # all but 1/(χ²/ν) of the widened variance is beyond the statistical one
    design = np.column_stack([np.ones(5), SIZES**-0.5])
    alone = 0.01**2 * np.linalg.inv(design.T @ design)[0, 0]
    assert found.limit.hidden_variance[0, 0] == pytest.approx((found.reduced_chi2 - 1) * alone, rel=1e-9)
