"""The quality of a collapse against its formula as the paper writes it, and on curves that do collapse."""

import numpy as np
import pytest

from conetone.aggregate.collapse import Curve, best_collapse, collapse_quality, slope_curve
from conetone.errors import InputError
from conetone.fit.profile import profile


def plain_quality(curves):
    """Houdayer & Hartmann (2004), their equations, point by point."""
    terms = []
    for i, curve in enumerate(curves):
        for x, y, dy in zip(curve.x, curve.y, curve.error, strict=True):
            chosen = []
            for j, other in enumerate(curves):
                if j == i:
                    continue
                for k in range(len(other.x) - 1):
                    last = k == len(other.x) - 2
                    if other.x[k] <= x < other.x[k + 1] or (last and x == other.x[k + 1]):
                        chosen += [(other.x[m], other.y[m], other.error[m] ** -2) for m in (k, k + 1)]
            if not chosen:
                continue
            px, py, w = np.array(chosen).T
            K, Kx, Ky = w.sum(), (w * px).sum(), (w * py).sum()
            Kxx, Kxy = (w * px * px).sum(), (w * px * py).sum()
            delta = K * Kxx - Kx**2
            Y = (Kxx * Ky - Kx * Kxy + x * (K * Kxy - Kx * Ky)) / delta
            dY2 = (Kxx - 2 * x * Kx + x * x * K) / delta
            terms.append((y - Y) ** 2 / (dy**2 + dY2))
    return np.mean(terms) if terms else np.nan


def test_it_is_the_formula():
    undefined = 0
    for seed in range(300):
        generator = np.random.default_rng(seed)
        curves = []
        for _ in range(generator.integers(1, 5)):
            count = generator.integers(1, 9)
            # whole numbers, so that points of different curves often coincide
            x = np.sort(generator.choice(20, count, replace=False)) + generator.choice([0.0, 0.3])
            curves.append(Curve(x, generator.normal(size=count), generator.uniform(0.1, 2, count)))
        plain = plain_quality(curves)
        undefined += np.isnan(plain)
        np.testing.assert_allclose(collapse_quality(curves), plain, rtol=1e-9)
    assert 0 < undefined < 150


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_straight_lines_that_collapse_have_quality_one(seed):
    # the line through neighbours is unbiased for a straight curve, so every term has mean 1 exactly
    generator = np.random.default_rng(seed)
    found = []
    for _ in range(200):
        curves = []
        for _ in range(4):
            x, error = np.sort(generator.uniform(0, 1, 12)), generator.uniform(0.05, 0.2, 12)
            curves.append(Curve(x, 2 - 3 * x + error * generator.normal(size=12), error))
        found.append(collapse_quality(curves))
    assert abs(np.mean(found) - 1) < 5 * np.std(found) / np.sqrt(len(found))
    assert np.std(found) < 0.5


SIZES = (1000, 2000, 4000, 8000, 16000)
POWERS = np.linspace(0.3, 1.0, 36)


def slopes(generator, power, error=0.01):
    """Local slopes 2/3 that bend upwards at rank ∝ n^power, at log-spaced ranks of every size."""
    curves = {}
    for n in SIZES:
        rank = np.geomspace(2, n / 4, 25)
        y = 2 / 3 + np.log1p(rank / n**power) + error * generator.normal(size=25)
        curves[n] = Curve(rank, y, np.full(25, error))
    return curves


@pytest.mark.parametrize("power", [0.5, 0.75])
def test_the_right_power_collapses_and_a_wrong_one_does_not(power):
    found = [best_collapse(slopes(np.random.default_rng(seed), power), POWERS) for seed in range(10)]
    right = np.array([f.quality[np.argmin(np.abs(POWERS - power))] for f in found])
    wrong = np.array([f.quality[np.argmin(np.abs(POWERS - power - 0.2))] for f in found])
    # curvature between neighbours adds a little to 1
    assert 0.9 < right.mean() < 1.2
    assert (wrong > 10).all()
    best = np.array([f.power for f in found])
    assert np.abs(best - power).max() < 0.03
    assert all(f.lowest < power < f.highest for f in found)
    assert all(f.highest - f.lowest < 0.1 for f in found)


def test_the_interval_ends_where_quality_is_one_more():
    found = best_collapse(slopes(np.random.default_rng(1), 0.6), POWERS)
    at = np.interp([found.lowest, found.highest], POWERS, found.quality)
    np.testing.assert_allclose(at, np.nanmin(found.quality) + 1, rtol=1e-12)
    assert found.power == POWERS[np.nanargmin(found.quality)]


def test_an_interval_that_reaches_the_end_of_the_grid_is_open():
    curves = slopes(np.random.default_rng(1), 0.6)
    assert best_collapse(curves, POWERS[POWERS > 0.6]).lowest == -np.inf
    assert best_collapse(curves, POWERS[POWERS < 0.6]).highest == np.inf
    flat = {n: Curve(c.x, np.full(25, 2 / 3), c.error) for n, c in curves.items()}  # any power does
    found = best_collapse(flat, POWERS)
    assert (found.lowest, found.highest) == (-np.inf, np.inf)


def test_powers_that_pull_the_curves_apart_have_no_quality():
    found = best_collapse(slopes(np.random.default_rng(1), 0.75), np.array([-9.0, 0.75, 9.0]))
    assert np.isnan(found.quality[[0, 2]]).all()
    assert found.power == 0.75
    assert (found.lowest, found.highest) == (-np.inf, np.inf)
    nothing = best_collapse(slopes(np.random.default_rng(1), 0.75), np.array([-9.0, 9.0]))
    assert np.isnan([nothing.power, nothing.lowest, nothing.highest]).all()


def test_curves_without_overlap_and_a_single_curve_have_no_quality():
    a = Curve(np.array([0.0, 1]), np.zeros(2), np.ones(2))
    b = Curve(np.array([2.0, 3]), np.zeros(2), np.ones(2))
    assert np.isnan(collapse_quality([a, b]))
    assert np.isnan(collapse_quality([a]))
    assert np.isnan(collapse_quality([]))


def test_slope_curves_of_spectra():
    generator = np.random.default_rng(1)
    ranks = np.arange(1.0, 301)
    seen = profile([ranks**-0.7 * np.exp(0.05 * generator.normal(size=300)) for _ in range(8)], 20)
    curve = slope_curve(seen)
    assert len(curve.x) == len(seen.slope) - 1
    assert (np.abs(curve.y - 0.7) < 5 * curve.error).mean() > 0.9


def arrays(*values):
    return [np.array(v, dtype=float) for v in values]


@pytest.mark.parametrize(
    ("x", "y", "error", "message"),
    [
        ([1, 2], [1, 2], [1, 0], "errors above 0"),
        ([1, 1], [1, 2], [1, 1], "rising"),
        ([1, 2], [1, np.nan], [1, 1], "finite"),
        ([1, 2], [1, 2, 3], [1, 1], "one shape"),
    ],
)
def test_what_is_no_curve(x, y, error, message):
    with pytest.raises(InputError, match=message):
        Curve(*arrays(x, y, error))


def test_what_cannot_be_collapsed():
    curve = Curve(*arrays([1, 2], [1, 2], [1, 1]))
    with pytest.raises(InputError, match="at least two"):
        best_collapse({10: curve}, POWERS)
    with pytest.raises(InputError, match="positive ranks"):
        best_collapse({10: curve, 20: Curve(*arrays([0, 2], [1, 2], [1, 1]))}, POWERS)
    with pytest.raises(InputError, match="powers"):
        best_collapse({10: curve, 20: curve}, POWERS[::-1])
