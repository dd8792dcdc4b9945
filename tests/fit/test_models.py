"""Models of log λ against rank: exact on what they describe, in bins of any width."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from conetone.fit.leastsquares import weighted_least_squares
from conetone.fit.models import EXPONENT, MODELS, Model
from conetone.fit.windows import RankBins

TERMS = {
    "power": (lambda r: 1.0, lambda r: -np.log(r)),
    "top-correction": (lambda r: 1.0, lambda r: -np.log(r), lambda r: 1 / r),
}

rising_edges = st.lists(st.integers(1, 500), min_size=7, max_size=15, unique=True).map(
    lambda edges: RankBins(tuple(sorted(edges)))
)


def tolerance_of(design):
    """Terms that are nearly collinear, far from the top, make the parameters uncertain, not the curve."""
    return max(1e-14 * np.linalg.cond(design), 1e-11)


def test_every_model_has_its_formula_here():
    assert set(TERMS) == set(MODELS)
    assert all(model.name == name for name, model in MODELS.items())
    assert all(model.parameters == len(TERMS[name]) for name, model in MODELS.items())


@pytest.mark.parametrize("model", MODELS)
@settings(max_examples=50, deadline=None)
@given(bins=rising_edges)
def test_designs_are_terms_averaged_over_ranks(model, bins):
    design = MODELS[model].design(bins)
    for b in range(bins.count):
        ranks = range(bins.edges[b], bins.edges[b + 1])
        plain = [sum(term(rank) for rank in ranks) / len(ranks) for term in TERMS[model]]
        np.testing.assert_allclose(design[b], plain, rtol=1e-12, atol=1e-14)


@settings(max_examples=100, deadline=None)
@given(rising_edges, st.floats(0.1, 3), st.floats(-5, 5))
def test_a_power_law_is_found_exactly_in_any_bins(bins, exponent, log_amplitude):
    ranks = np.arange(1, bins.last + 1)
    values = bins.average(np.log(np.exp(log_amplitude) * ranks**-exponent))
    for model in MODELS.values():
        design = model.design(bins)
        fit = weighted_least_squares(design, values, np.ones(bins.count))
        assert fit.parameters[EXPONENT] == pytest.approx(exponent, abs=tolerance_of(design))
        assert fit.chi2 == pytest.approx(0, abs=1e-18)
    two = weighted_least_squares(MODELS["power"].design(bins), values, np.ones(bins.count))
    assert two.parameters == pytest.approx([log_amplitude, exponent], abs=1e-11)


@settings(max_examples=100, deadline=None)
@given(rising_edges, st.floats(0.1, 3), st.floats(-1, 1))
def test_a_top_correction_is_found_exactly_in_any_bins(bins, exponent, correction):
    ranks = np.arange(1, bins.last + 1)
    values = bins.average(2 - exponent * np.log(ranks) + correction / ranks)
    design = MODELS["top-correction"].design(bins)
    fit = weighted_least_squares(design, values, np.ones(bins.count))
    assert fit.parameters == pytest.approx([2, exponent, correction], abs=tolerance_of(design))
    assert fit.chi2 == pytest.approx(0, abs=1e-18)


def test_a_missing_prior_width_is_refused():
    terms = MODELS["top-correction"].terms
    with pytest.raises(ValueError, match="one prior width for each parameter after the exponent"):
        Model("unbound", terms, "no prior")
    with pytest.raises(ValueError, match="one prior width"):
        Model("bound twice", terms[:2], "a prior for nothing", prior_widths=(1.0,))
