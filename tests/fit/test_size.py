"""All fits of one size: those of direct calls, or the reason why there are none."""

import json
from dataclasses import replace

import numpy as np
import pytest

from conetone.fit.logs import bin_logs, smooth_logs
from conetone.fit.models import MODELS, POWER_MODELS
from conetone.fit.powerlaw import DataVector, fit_power_law
from conetone.fit.ranking import ranked_magnitudes
from conetone.fit.size import ESTIMATORS, SizeSpectra, WindowSettings, fit_size
from conetone.fit.smoothcount import ranks_of_windows
from conetone.fit.windows import Growth, WindowRule, bins_of_windows

SIZE = 400


def rule(first, last):
    return WindowRule(Growth.parse(first), Growth.parse(last))


NARROW, WIDE = rule("0.25 * n^0.5", "0.25 * n^0.75"), rule("0.25 * n^0.5", "0.35 * n^0.75")
SETTINGS = WindowSettings((NARROW, WIDE), smallest_rank=2, bins=9, models=POWER_MODELS)


def spectra(replicates=5, ranks=200, exponent=0.8, seed=1, complete=True):
    generator = np.random.default_rng(seed)
    logs = -exponent * np.log(np.arange(1, ranks + 1)) + 0.05 * generator.normal(size=(replicates, ranks))
    return SizeSpectra(SIZE, list(np.exp(-np.sort(-logs, axis=1))), complete)


def assert_same(found, expected):
    assert (found is None) == (expected is None)
    if found is not None:
        for name in ("exponent", "statistical", "misfit", "chi2"):
            np.testing.assert_array_equal(getattr(found.estimates, name), getattr(expected.estimates, name))
        np.testing.assert_array_equal(found.parameters, expected.parameters)
        np.testing.assert_array_equal(found.fitted, expected.fitted)
        assert (found.degrees, found.bins_cut) == (expected.degrees, expected.bins_cut)


@pytest.mark.parametrize("weighting", ["diagonal", "correlated"])
@pytest.mark.parametrize("estimator", ESTIMATORS)
def test_fits_are_those_of_direct_calls(estimator, weighting):
    given = spectra()
    chosen = replace(SETTINGS, weighting=weighting)
    windows = [each.at(SIZE, 2) for each in chosen.rules]
    if estimator == "rank-bins":
        data = bin_logs(given.magnitudes, bins_of_windows(windows, 9))
    else:
        data = smooth_logs(given.magnitudes, ranks_of_windows(windows, 9), complete=True)
    vector = DataVector.of(data, SIZE, [MODELS[name] for name in POWER_MODELS], weighting)
    found = fit_size(given, chosen, estimator)
    assert found.reason is None
    assert (found.size, found.replicates) == (SIZE, 5)
    np.testing.assert_array_equal(found.vector.data.values, data.values)
    np.testing.assert_array_equal(found.vector.scatter, vector.scatter)
    assert list(found.fits) == chosen.candidates
    for each, window in zip(chosen.rules, windows, strict=True):
        for model in POWER_MODELS:
            assert_same(found.fits[each, model], fit_power_law(vector, MODELS[model], window))
    assert any(fit is not None for fit in found.fits.values())


@pytest.mark.parametrize("estimator", ESTIMATORS)
@pytest.mark.parametrize("replicates", [0, 1])
def test_one_replicate_has_no_error_bar(estimator, replicates):
    found = fit_size(spectra(replicates), SETTINGS, estimator)
    assert found.vector is None
    assert found.fits == {}
    assert found.replicates == replicates
    assert found.reason == f"{replicates} usable replicates; an error bar takes two"


@pytest.mark.parametrize("estimator", ESTIMATORS)
def test_fewer_ranks_than_any_window_takes(estimator):
    # the narrow window ends before rank 0.25 · 400^0.75 = 22.36: 21 ranks are too few, 22 are enough for bins
    found = fit_size(spectra(ranks=21), SETTINGS, estimator)
    assert found.reason == "21 ranks with non-zero eigenvalues, fewer than any window takes"
    assert found.vector is None
    found = fit_size(spectra(ranks=22), SETTINGS, estimator)
    assert "fewer than any window takes" not in (found.reason or "")


def test_the_shortest_spectrum_decides_and_longer_windows_have_no_fit():
    given = spectra()
    # the wide window ends before rank 31.3
    shortened = replace(given, magnitudes=[*given.magnitudes[:4], given.magnitudes[4][:25]])
    found = fit_size(shortened, SETTINGS, "rank-bins")
    assert all(found.fits[WIDE, model] is None for model in POWER_MODELS)
    alone = fit_size(shortened, replace(SETTINGS, rules=(NARROW,)), "rank-bins")
    for model in POWER_MODELS:
        assert_same(found.fits[NARROW, model], alone.fits[NARROW, model])
    assert found.fits[NARROW, "power"] is not None


@pytest.mark.parametrize("estimator", ESTIMATORS)
def test_a_window_that_ends_before_it_begins_is_none(estimator):
    crossed = replace(SETTINGS, rules=(rule("0.5 * n^0.75", "0.25 * n^0.75"),))
    assert "fewer than any window takes" in fit_size(spectra(), crossed, estimator).reason


def test_too_few_bins():
    short = replace(SETTINGS, rules=(rule("1.1 * n^0.5", "1.2 * n^0.5"),))  # ranks 22 and 23
    found = fit_size(spectra(), short, "rank-bins")
    assert found.reason == "2 bins of rank in the windows; a fit takes 4"
    between = replace(SETTINGS, rules=(rule("1.11 * n^0.5", "1.14 * n^0.5"),))  # between two ranks
    assert fit_size(spectra(), between, "rank-bins").reason == "0 bins of rank in the windows; a fit takes 4"


@pytest.mark.parametrize("estimator", ESTIMATORS)
def test_models_with_more_parameters_take_more_points(estimator):
    chosen = replace(SETTINGS, rules=(WIDE,), bins=4, models=("top-and-knee",))
    found = fit_size(spectra(), chosen, estimator)
    kind = "bins of rank" if estimator == "rank-bins" else "smooth ranks"
    assert found.reason == f"4 {kind} in the windows; a fit takes 6"
    assert fit_size(spectra(), replace(chosen, models=("power",)), estimator).reason is None
    # beside a model that takes less it has no fit, and the size is none the worse for it
    both = fit_size(spectra(), replace(chosen, models=("power", "top-and-knee")), estimator)
    assert both.fits[WIDE, "top-and-knee"] is None
    assert both.fits[WIDE, "power"] is not None


@pytest.mark.parametrize("complete", [True, False])
def test_windows_out_of_reach_of_the_smooth_count(complete):
    # 40 of exponent 0.8 reach smooth rank 22 or 15: between the ends of the windows, or before both
    given = spectra(ranks=40, complete=complete)
    found = fit_size(given, SETTINGS, "smooth-count")
    if complete:
        assert all(found.fits[WIDE, model] is None for model in POWER_MODELS)
        alone = fit_size(given, replace(SETTINGS, rules=(NARROW,)), "smooth-count")
        np.testing.assert_array_equal(found.vector.data.values, alone.vector.data.values)
        assert np.isfinite(found.vector.data.values).all()
        assert_same(found.fits[NARROW, "power"], alone.fits[NARROW, "power"])
        assert found.fits[NARROW, "power"] is not None
    else:
        assert found.reason == "the smooth count of 40 eigenvalues does not reach the windows"
    # bins of rank go to the last one
    assert fit_size(given, SETTINGS, "rank-bins").fits[WIDE, "power"] is not None


@pytest.mark.parametrize("estimator", ESTIMATORS)
def test_zeros_never_reach_a_fit(estimator):
    # what is zero to rounding is not ranked, so that no logarithm of it is taken
    generator = np.random.default_rng(3)
    magnitudes = []
    for _ in range(4):
        positive = np.arange(1, 101) ** -0.7 * np.exp(0.02 * generator.normal(size=100))
        eigenvalues = np.concatenate([positive, np.zeros(30), 1e-17 * generator.normal(size=20)])
        magnitudes.append(ranked_magnitudes(eigenvalues, "antisymmetric"))
        assert len(magnitudes[-1]) == 100
    found = fit_size(SizeSpectra(SIZE, magnitudes, complete=True), SETTINGS, estimator)
    assert found.reason is None
    assert np.isfinite(found.vector.means).all()
    assert np.isfinite([fit.estimates.exponent for fit in found.fits.values() if fit]).all()


@pytest.mark.parametrize("estimator", ESTIMATORS)
@pytest.mark.parametrize("seed", [1, 2, 3])
def test_both_estimators_find_a_power_law(estimator, seed):
    found = fit_size(spectra(replicates=20, seed=seed), SETTINGS, estimator)
    estimates = found.fits[WIDE, "power"].estimates
    assert (
        abs(estimates.exponent[0] - 0.8) < 5 * np.hypot(estimates.statistical[0], estimates.misfit[0]) + 0.02
    )


@pytest.mark.parametrize(
    "chosen",
    [
        SETTINGS,
        replace(SETTINGS, estimator="rank-bins", weighting="correlated", models=("power",)),
        WindowSettings((rule("0.125 * n^0.3", "1.5 * n^1"),), 1, 4, ("logarithm", "knee")),
    ],
)
def test_settings_survive_json(chosen):
    text = json.dumps(chosen.as_json())
    assert WindowSettings.from_json(json.loads(text)) == chosen
    assert json.dumps(WindowSettings.from_json(json.loads(text)).as_json()) == text


def test_candidates_are_every_window_with_every_model():
    chosen = replace(SETTINGS, models=("power", "knee"))
    assert chosen.candidates == [(NARROW, "power"), (NARROW, "knee"), (WIDE, "power"), (WIDE, "knee")]
