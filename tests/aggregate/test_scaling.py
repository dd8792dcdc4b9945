"""Extrapolation: exact where the answer is known, and against the same average written as loops."""

from itertools import combinations

import numpy as np
import pytest

from conetone.aggregate.scaling import (
    LARGEST_TERM,
    WAY_SHARE,
    SizeEstimates,
    average_at_sizes,
    extrapolate,
    forms_of,
    without_smallest,
)

SIZES = np.array([250.0, 500, 1000, 2000, 4000])
# Errors beside which the prior of the terms is nothing.
SMALL = 1e-6


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


def law(limit, amplitude, omega, sizes=SIZES, second=(0.0, 1.0)):
    """α(n) = α∞ + a n^−ω + b n^−ω′ as one copy of one candidate; `second` is (b, ω′)."""
    other, power = second
    return (limit + amplitude * sizes**-omega + other * sizes**-power)[np.newaxis, :, np.newaxis]


@pytest.mark.parametrize("omega", [0.25, 0.5, 0.75, 1.0, 2.0])
@pytest.mark.parametrize("cut", [0, 1, 2])
def test_one_true_omega_is_exact(omega, cut):
    for limit, amplitude in ((0.75, 3.0), (1.0, -2.0), (0.6, 0.0)):
        curve = np.array([100.0, 1000.0, 4000.0, np.inf])
        found = extrapolate(estimates_of(law(limit, amplitude, omega), SMALL), [omega], cut)
        assert found.limit.value[0, 0] == pytest.approx(limit, abs=1e-8)
        expected = [limit + amplitude * size**-omega for size in curve]
        assert found.at(curve).value[0] == pytest.approx(expected, abs=1e-8)
        assert found.omega_weights == pytest.approx([1])
        assert found.weights == pytest.approx([1])
        assert found.at_sizes.value[0] == pytest.approx(limit + amplitude * SIZES**-omega, rel=1e-12)
        # nothing is left but the prior of the term; every size not used costs a factor e
        prior = (amplitude * SIZES[0] ** -omega / LARGEST_TERM) ** 2
        shares = np.exp(-np.arange(cut + 1)) / np.exp(-np.arange(cut + 1)).sum()
        assert found.reduced_chi2 == pytest.approx(
            prior * shares @ (1 / (4.0 - np.arange(cut + 1))), abs=1e-6
        )
        # without misfit nothing is hidden but the way to infinity, for copies to come also that of a prior
        hidden = found.at(curve).hidden_variance[0]
        assert hidden[:3] == pytest.approx(0, abs=20 * max(prior, 1) * SMALL**2)
        assert hidden[3] == pytest.approx((WAY_SHARE * amplitude * 4000**-omega) ** 2, abs=1e-8)


def test_forms_are_every_omega_and_every_pair():
    assert forms_of([0.5]) == [(0.5,)]
    omegas = [0.5, 0.75, 1.0, 2.0]
    expected = {(a,) for a in omegas} | {(a, b) for a in omegas for b in omegas if a < b}
    assert len(forms_of(omegas)) == len(expected) == 10
    assert set(forms_of(omegas)) == expected


@pytest.mark.parametrize("omegas", [(0.5, 1.0), (0.25, 0.75), (1.0, 2.0)])
@pytest.mark.parametrize("cut", [0, 1, 2])
def test_two_true_terms_are_exact(omegas, cut):
    # errors so small that one term alone cannot stand
    second = -0.08 * SIZES[0] ** omegas[1]
    exponent = law(0.75, 3.0, omegas[0], second=(second, omegas[1]))
    found = extrapolate(estimates_of(exponent, SMALL), omegas, cut)
    assert found.limit.value[0, 0] == pytest.approx(0.75, abs=1e-6)
    assert found.two_terms == pytest.approx(1)
    assert found.omega_weights == pytest.approx([0.5, 0.5])
    curve = np.array([500.0, 1e5])
    expected = 0.75 + 3 * curve ** -omegas[0] + second * curve ** -omegas[1]
    assert found.at(curve).value[0] == pytest.approx(expected, abs=1e-6)
    way = 3 * 4000 ** -omegas[0] + second * 4000 ** -omegas[1]
    assert found.limit.hidden_variance[0, 0] == pytest.approx((WAY_SHARE * way) ** 2, abs=1e-6)


def test_a_second_term_costs_two_units():
    # one true term and no noise: neither curve has a χ², so that only the coefficients tell them apart
    for omegas in ([0.5, 1.0], [0.5, 0.75, 1.0]):
        found = extrapolate(estimates_of(law(0.75, 3.0, 0.5), SMALL), omegas, 0)
        holding_it = len(omegas) - 1  # pairs with the true ω
        assert found.two_terms == pytest.approx(holding_it / (holding_it + np.e), rel=1e-6)
        # a curve with two terms is shared by both
        assert found.omega_weights[0] == pytest.approx(1 - found.two_terms / 2, rel=1e-6)
        assert found.omega_weights.sum() == pytest.approx(1)
        assert found.limit.value[0, 0] == pytest.approx(0.75, abs=1e-8)


def test_of_three_sizes_no_second_term_can_be_judged():
    sizes = SIZES[:3]
    found = extrapolate(estimates_of(law(0.75, 3.0, 0.5, sizes), sizes=sizes), [0.5, 1.0], 2)
    assert found.two_terms == 0
    sizes = SIZES[:4]
    found = extrapolate(estimates_of(law(0.75, 3.0, 0.5, sizes), sizes=sizes), [0.5, 1.0], 2)
    assert found.two_terms > 0


def test_of_several_omegas_the_value_lies_between_and_the_spread_is_systematic():
    sizes = SIZES[-3:]  # with one term only
    estimates = estimates_of(law(0.75, 3.0, 0.75, sizes), 1e-4, sizes=sizes)
    omegas = [0.5, 0.75, 1.0]
    single = [extrapolate(estimates, [omega], 0).limit.value[0, 0] for omega in omegas]
    found = extrapolate(estimates, omegas, 0)
    assert min(single) < found.limit.value[0, 0] < max(single)
    assert found.omega_weights.sum() == pytest.approx(1)
    assert found.omega_weights.argmax() == 1  # the true ω has no χ²
    weighted = found.omega_weights @ single
    assert found.limit.value[0, 0] == pytest.approx(weighted, rel=1e-12)
    spread = found.omega_weights @ (np.array(single) - weighted) ** 2
    way = WAY_SHARE * (weighted - found.at_sizes.value[0, -1])
    assert found.limit.hidden_variance[0, 0] >= spread + way**2 > way**2


def test_the_prior_keeps_a_term_from_growing_where_data_do_not_ask_for_it():
    # two terms, hardly to be told apart, on noise that says nothing of either
    generator = np.random.default_rng(1)
    exponent = 0.75 + 0.3 * generator.normal(size=(50, 5, 1))
    estimates = estimates_of(exponent, 0.3)
    found = extrapolate(estimates, [0.5, 0.6], 0)
    moved = found.limit.value[:, 0] - found.at(SIZES[:1]).value[:, 0]
    assert np.abs(moved).max() < 2 * LARGEST_TERM


def test_the_way_to_infinity_is_systematic_beyond_the_largest_size():
    estimates = random_estimates(5)
    largest = estimates.sizes[-1]
    found = extrapolate(estimates, [0.5, 1.0], 1)
    # from the average there, so that a curve that misses it pays for that
    points = found.at(np.array([largest, np.nextafter(largest, np.inf), 4 * largest, np.inf]))
    way = WAY_SHARE * (points.value - found.at_sizes.value[:, -1:])
    np.testing.assert_allclose(
        points.hidden_variance[:, 1] - points.hidden_variance[:, 0], way[:, 1] ** 2, rtol=1e-9
    )
    assert (points.hidden_variance[:, 1:] > way[:, 1:] ** 2).all()


def test_the_true_omega_dominates_when_errors_are_small():
    found = extrapolate(estimates_of(law(0.75, 3.0, 0.75), statistical=1e-5), [0.5, 0.75, 1.0], 0)
    # half the weight of a curve with two terms goes to the other one
    assert found.omega_weights[1] == pytest.approx(1 - found.two_terms / 2, abs=1e-6)
    assert found.limit.value[0, 0] == pytest.approx(0.75, abs=1e-6)


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_a_second_term_that_is_left_out_biases_and_one_that_is_let_in_does_not(seed):
    # repeated noise about a law of two terms: with one ω alone the limit is many errors off
    generator = np.random.default_rng(seed)
    truth = law(0.75, 2.0, 0.5, second=(-12.0, 1.0))
    exponents = truth + 0.001 * generator.normal(size=(200, *truth.shape[1:]))
    found, wrong = [], []
    for exponent in exponents:
        estimates = estimates_of(exponent[np.newaxis], statistical=0.001)
        found.append(extrapolate(estimates, [0.5, 1.0], 0).limit.value[0, 0])
        wrong.append(extrapolate(estimates, [0.5], 0).limit.value[0, 0])
    assert abs(np.mean(found) - 0.75) < 5 * np.std(found, ddof=1) / np.sqrt(200)
    assert abs(np.mean(wrong) - 0.75) > 20 * np.std(wrong, ddof=1) / np.sqrt(200)


def test_without_the_smallest_sizes_the_rest_is_as_it_was():
    estimates = random_estimates(3)
    for count in range(3):
        found = without_smallest(estimates, count)
        np.testing.assert_array_equal(found.sizes, estimates.sizes[count:])
        np.testing.assert_array_equal(found.bins_cut, estimates.bins_cut[count:])
        np.testing.assert_array_equal(found.parameters, estimates.parameters)
        for name in ("exponent", "statistical", "misfit", "chi2"):
            np.testing.assert_array_equal(getattr(found, name), getattr(estimates, name)[:, count:])


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
    found = extrapolate(estimates_of(exponent, SMALL), [0.5], 0)
    assert found.weights == pytest.approx([1, 0])
    assert found.limit.value[0, 0] == pytest.approx(0.75, abs=1e-8)


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
    found = extrapolate(estimates_of(exponent, 1e-4), [0.5], 2)
    assert found.limit.value[0, 0] == pytest.approx(0.75, abs=1e-5)
    kept = extrapolate(estimates_of(exponent, 1e-4), [0.5], 1)
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


def plain_average_at(estimates, copy, s):
    """Average over windows and models at one size, and the variance it hides."""
    used = [
        c
        for c in range(len(estimates.parameters))
        if np.isfinite(estimates.exponent[copy, s, c]) and np.isfinite(plain_criterion(estimates, copy, c))
    ]
    criteria = np.array([plain_criterion(estimates, copy, c) for c in used])
    weights = np.exp(-(criteria - criteria.min()) / 2)
    weights /= weights.sum()
    exponent, misfit = estimates.exponent[copy, s, used], estimates.misfit[copy, s, used]
    value = weights @ exponent
    return value, weights @ (misfit**2 + (exponent - value) ** 2)


def plain_curves(estimates, copy, omegas, most_cut):
    """Every curve: (information criterion, candidate, form, its prediction function)."""
    for c in range(len(estimates.parameters)):
        for form in [*((omega,) for omega in omegas), *combinations(omegas, 2)]:
            sets_of_sizes = {
                tuple(
                    s for s in range(cut, len(estimates.sizes)) if np.isfinite(estimates.exponent[copy, s, c])
                )
                for cut in range(most_cut + 1)
            }
            for used in (list(s) for s in sorted(sets_of_sizes) if len(s) >= len(form) + 2):
                alpha = estimates.exponent[copy, used, c]
                statistical = estimates.statistical[copy, used, c] ** 2
                total = statistical + estimates.misfit[copy, used, c] ** 2
                powers = [estimates.sizes[used] ** -omega for omega in form]
                design = np.column_stack([np.ones(len(used)), *powers])
                # of each term at the smallest size one more measurement, 0 ± LARGEST_TERM
                priors = np.diag([0.0, *(estimates.sizes[0] ** -omega for omega in form)])[1:]
                design = np.vstack([design, priors])
                precision = np.diag([*(1 / total), *np.full(len(form), LARGEST_TERM**-2)])
                gain = np.linalg.inv(design.T @ precision @ design) @ design.T @ precision
                measured = np.append(alpha, np.zeros(len(form)))
                parameters = gain @ measured
                chi2 = (measured - design @ parameters) ** 2 @ np.diag(precision)
                gain = gain[:, : len(used)]
                widening = max(chi2 / (len(measured) - 1 - len(form)), 1)

                def predict(
                    size,
                    form=form,
                    gain=gain,
                    parameters=parameters,
                    widening=widening,
                    total=total,
                    statistical=statistical,
                ):
                    row = np.array([1, *(size**-omega for omega in form)])
                    functional = row @ gain
                    variance = widening * functional**2 @ total - functional**2 @ statistical
                    return row @ parameters, max(variance, 0)

                unused = len(estimates.sizes) - len(used)
                own = chi2 + 2 * (1 + len(form)) + 2 * unused
                yield plain_criterion(estimates, copy, c) + own, c, form, predict


def plain_extrapolation(estimates, copy, curves, size):
    """Value, hidden variance, weights of the candidates, and weight of curves with two terms."""
    lowest = min(criterion for criterion, *_ in curves)
    raw = [np.exp(-(criterion - lowest) / 2) for criterion, *_ in curves]
    weights = [r / sum(raw) for r in raw]
    predictions = [predict(size) for *_, predict in curves]
    value = sum(w * p for w, (p, _) in zip(weights, predictions, strict=True))
    hidden = sum(w * (v + (p - value) ** 2) for w, (p, v) in zip(weights, predictions, strict=True))
    if size > estimates.sizes[-1]:
        way = value - plain_average_at(estimates, copy, len(estimates.sizes) - 1)[0]
        hidden += (WAY_SHARE * way) ** 2
    shares = [0.0] * len(estimates.parameters)
    two_terms = 0.0
    for weight, (_, c, form, _) in zip(weights, curves, strict=True):
        shares[c] += weight
        two_terms += weight * (len(form) == 2)
    return value, hidden, shares, two_terms


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
    for seed in range(40):
        estimates = random_estimates(seed)
        sizes = np.array([estimates.sizes[0], 5000.0, np.inf])
        found = extrapolate(estimates, omegas, most_cut)
        averages = found.at(sizes)
        np.testing.assert_array_equal(found.limit.value[:, 0], averages.value[:, -1])
        for copy in (0, 2):
            curves = list(plain_curves(estimates, copy, omegas, most_cut))
            for at, size in enumerate(sizes):
                value, hidden, shares, two_terms = plain_extrapolation(estimates, copy, curves, size)
                assert averages.value[copy, at] == pytest.approx(value, rel=1e-9)
                assert averages.hidden_variance[copy, at] == pytest.approx(hidden, rel=1e-7, abs=1e-14)
            if copy == 0:
                assert found.weights == pytest.approx(shares, abs=1e-10)
                assert found.two_terms == pytest.approx(two_terms, abs=1e-10)


def test_averages_at_each_size_against_loops():
    for seed in range(60):
        estimates = random_estimates(seed)
        found = average_at_sizes(estimates)
        for copy in range(len(estimates.exponent)):
            for s in range(len(estimates.sizes)):
                value, hidden = plain_average_at(estimates, copy, s)
                assert found.value[copy, s] == pytest.approx(value, rel=1e-10)
                assert found.hidden_variance[copy, s] == pytest.approx(hidden, rel=1e-8, abs=1e-15)


def test_exactly_regular_series_are_no_division_by_zero():
    # identical replicates of a power law have neither a statistical error nor a misfit
    for misfit in (0.0, 1e-30):
        found = extrapolate(estimates_of(law(0.75, 2.0, 0.5), 0.0, misfit), [0.5], 1)
        assert found.limit.value[0, 0] == pytest.approx(0.75, abs=1e-8)
        assert np.isfinite(found.limit.hidden_variance).all()


def test_misfit_is_systematic_and_not_statistical():
    small, large = (
        extrapolate(estimates_of(law(0.75, 1, 0.5), SMALL, misfit), [0.5], 0).at(SIZES[-1:]).hidden_variance
        for misfit in (SMALL, 2 * SMALL)
    )
    # the exponent is a fixed linear functional here: its variance from misfits is four times as large
    assert large[0, 0] == pytest.approx(4 * small[0, 0], rel=1e-6)


def test_a_line_that_does_not_fit_widens_its_own_error():
    bent = law(0.75, 1.0, 0.5)
    bent[0, :, 0] += 0.05 * np.array([1, -1, 1, -1, 1])
    found = extrapolate(estimates_of(bent, statistical=0.01), [0.5], 0)
    assert found.reduced_chi2 > 10
    straight = extrapolate(estimates_of(law(0.75, 1, 0.5), statistical=0.01), [0.5], 0)
    at_largest = [each.at(SIZES[-1:]).hidden_variance[0, 0] for each in (found, straight)]
    assert at_largest[1] == pytest.approx(0, abs=1e-15)
    # all but 1/(χ²/ν) of the widened variance is beyond the statistical one
    design = np.column_stack([np.ones(5), SIZES**-0.5])
    prior = np.diag([0, (0.01 / LARGEST_TERM) ** 2 / SIZES[0]])
    gain = design[-1] @ np.linalg.solve(design.T @ design + prior, design.T)
    alone = 0.01**2 * gain @ gain
    assert at_largest[0] == pytest.approx((found.reduced_chi2 - 1) * alone, rel=1e-9)
