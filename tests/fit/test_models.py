"""Models of log λ against rank: exact on what they describe, in bins of any width and at smooth ranks."""

from math import exp, log, pi, tan

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.optimize import brentq

from conetone.fit.leastsquares import weighted_least_squares
from conetone.fit.models import (
    EXPONENT,
    KAPPA,
    KNEE_WIDTH,
    LOGARITHM_MODELS,
    MODELS,
    POWER_MODELS,
    Model,
)
from conetone.fit.smoothcount import SmoothRanks
from conetone.fit.windows import RankBins
from conetone.reference.plane import law_of_the_plane

SIZE = 700.0


def plain_lambert(r, kappa=KAPPA):
    """W with W e^W = r e^κ, by a root finder on log W + W."""
    return brentq(lambda w: log(w) + w - log(r) - kappa, 1e-9, 1e3, xtol=1e-14, rtol=1e-14)


POWER = (lambda r: 1.0, lambda r: -log(r))
TOP, KNEE = (lambda r: 1 / r), (lambda r: r / SIZE)
KAPPA_TERM = lambda r: 1 / (1 + plain_lambert(r))  # noqa: E731
# Terms, prior widths, and what has no parameter.
FORMULAS = {
    "power": (POWER, (), None),
    "top-correction": ((*POWER, TOP), (1,), None),
    "knee": ((*POWER, KNEE), (KNEE_WIDTH,), None),
    "top-and-knee": ((*POWER, TOP, KNEE), (1, KNEE_WIDTH), None),
    "logarithm": ((*POWER, KAPPA_TERM), (1,), lambda r: log(plain_lambert(r))),
    "logarithm-and-knee": ((*POWER, KAPPA_TERM, KNEE), (1, KNEE_WIDTH), lambda r: log(plain_lambert(r))),
}

rising_edges = st.lists(st.integers(1, 500), min_size=7, max_size=15, unique=True).map(
    lambda edges: RankBins(tuple(sorted(edges)))
)
smooth_ranks = st.lists(st.floats(1, 500), min_size=7, max_size=15, unique=True).map(
    lambda ranks: SmoothRanks(tuple(sorted(ranks)))
)
axes = st.one_of(rising_edges, smooth_ranks)


def plain_on(axis, function):
    """A function of rank as the axis sees it: at its ranks, or averaged over those of its bins."""
    if isinstance(axis, SmoothRanks):
        return [function(rank) for rank in axis.at]
    bins = [range(axis.edges[b], axis.edges[b + 1]) for b in range(axis.count)]
    return [sum(function(rank) for rank in ranks) / len(ranks) for ranks in bins]


def tolerance_of(design):
    """Terms that are nearly collinear, far from the top, make the parameters uncertain, not the curve."""
    return max(1e-13 * np.linalg.cond(design), 1e-11)


def test_every_model_has_its_formula_here():
    assert set(FORMULAS) == set(MODELS) == {*POWER_MODELS, *LOGARITHM_MODELS}
    for name, model in MODELS.items():
        terms, widths, offset = FORMULAS[name]
        assert model.name == name
        assert model.parameters == len(terms)
        assert model.prior_widths == widths
        assert (model.offset is None) == (offset is None)


@pytest.mark.parametrize("model", MODELS)
@settings(max_examples=30, deadline=None)
@given(axis=axes)
def test_designs_are_terms_as_the_axis_sees_them(model, axis):
    terms, _, offset = FORMULAS[model]
    design = MODELS[model].design(axis, SIZE)
    assert design.shape == (axis.count, len(terms))
    for k, term in enumerate(terms):
        np.testing.assert_allclose(design[:, k], plain_on(axis, term), rtol=1e-11, atol=1e-14)
    expected = plain_on(axis, offset) if offset else np.zeros(axis.count)
    np.testing.assert_allclose(MODELS[model].offset_on(axis, SIZE), expected, rtol=1e-11, atol=1e-14)


@settings(max_examples=100, deadline=None)
@given(axes, st.floats(0.1, 3), st.floats(-5, 5))
def test_a_power_law_is_found_exactly_by_every_model_without_a_logarithm(axis, exponent, log_amplitude):
    values = axis.of(lambda ranks: np.log(np.exp(log_amplitude) * ranks**-exponent))
    for name in POWER_MODELS:
        design = MODELS[name].design(axis, SIZE)
        fit = weighted_least_squares(design, values, np.ones(axis.count))
        assert fit.parameters[EXPONENT] == pytest.approx(exponent, abs=tolerance_of(design))
        assert fit.chi2 == pytest.approx(0, abs=1e-18)


@pytest.mark.parametrize("model", MODELS)
@settings(max_examples=30, deadline=None)
@given(axis=axes, exponent=st.floats(0.1, 3), seed=st.integers(0, 2**32))
def test_what_a_model_describes_it_finds_exactly(model, axis, exponent, seed):
    generator = np.random.default_rng(seed)
    terms, widths, offset = FORMULAS[model]
    truth = np.array([2, exponent, *(width * generator.uniform(-1, 1) for width in widths)])
    values = np.array(
        plain_on(
            axis,
            lambda r: (
                (offset(r) if offset else 0) + sum(p * term(r) for p, term in zip(truth, terms, strict=True))
            ),
        )
    )
    design = MODELS[model].design(axis, SIZE)
    values = values - MODELS[model].offset_on(axis, SIZE)
    fit = weighted_least_squares(design, values, np.ones(axis.count))
    assert fit.chi2 == pytest.approx(0, abs=1e-18)
    np.testing.assert_allclose(fit.parameters, truth, atol=10 * tolerance_of(design))


def test_the_lambert_law_counts_with_a_logarithm():
    # r(x) = x (log x + κ) values above A/x are λ_r = A W(r e^κ)/r
    for x in (5.0, 40.0, 3e4):
        rank = x * (log(x) + KAPPA)
        assert exp(FORMULAS["logarithm"][2](rank)) / rank == pytest.approx(1 / x, rel=1e-12)


@pytest.mark.parametrize("kappa", [KAPPA - 0.7, KAPPA - 0.3, KAPPA + 0.3, KAPPA + 0.7])
def test_a_term_takes_what_another_kappa_changes(kappa):
    # to first order; all that is known of κ are values within 0.7 of the middle
    axis = SmoothRanks(tuple(np.geomspace(5, 300, 12)))
    values = np.array([log(plain_lambert(r, kappa)) - log(r) for r in axis.at])
    model = MODELS["logarithm"]
    moved = values - model.offset_on(axis, SIZE)
    fit = weighted_least_squares(model.design(axis, SIZE), moved, np.ones(axis.count))
    alone = weighted_least_squares(model.design(axis, SIZE)[:, :2], moved, np.ones(axis.count))
    assert abs(fit.parameters[EXPONENT] - 1) < abs(alone.parameters[EXPONENT] - 1) / 8
    assert abs(fit.parameters[EXPONENT] - 1) < 0.003
    assert fit.parameters[2] == pytest.approx(kappa - KAPPA, rel=0.25)


@pytest.mark.parametrize(
    ("part", "kappa"),
    [("singular", KAPPA + log(2)), ("symmetric-positive", KAPPA), ("symmetric", KAPPA - log(2))],
)
def test_kappa_is_that_of_the_plane(part, kappa):
    # the spectrum known in closed form follows λ_r = A W(r e^κ)/r; with another κ there is a trend
    values = law_of_the_plane(part, 2_000)
    ranks = range(50, 2_000, 7)

    def trend(kappa):
        ratio = [log(values[r - 1] * r / plain_lambert(r, kappa)) for r in ranks]
        return np.polyfit(np.log(ranks), ratio, 1)[0]

    assert abs(trend(kappa)) < 0.004
    for wrong in (kappa - 0.7, kappa + 0.7):
        assert abs(trend(wrong)) > 2 * abs(trend(kappa))


@pytest.mark.parametrize(("exponent", "stated"), [(1, 0), (3 / 4, 2.4), (2 / 3, 4.7), (5 / 8, 6.9)])
def test_the_knee_is_the_sum_over_the_other_eigenvalues(exponent, stated):
    # Σ_{j ≠ i} 2 μ_j²/(μ_i² − μ_j²) → C i with C = −(π/α) cot(π/2α), which the width of the prior holds
    closed = -pi / exponent / tan(pi / 2 / exponent)
    assert closed == pytest.approx(stated, abs=0.05)
    assert abs(closed) < KNEE_WIDTH
    i, last = 4_000, 4_000_000
    j = np.delete(np.arange(1.0, last), i - 1)
    terms = 2 / ((j / i) ** (2 * exponent) - 1)
    beyond = 2 * i * (last / i) ** (1 - 2 * exponent) / (2 * exponent - 1)
    assert (terms.sum() + beyond) / i == pytest.approx(closed, abs=0.01)


def test_a_missing_prior_width_is_refused():
    terms = MODELS["top-correction"].terms
    with pytest.raises(ValueError, match="one prior width for each parameter after the exponent"):
        Model("unbound", terms, "no prior")
    with pytest.raises(ValueError, match="one prior width"):
        Model("bound twice", terms[:2], "a prior for nothing", prior_widths=(1.0,))
