"""Laws of the two-dimensional diamond against other routes to the same numbers: quadrature and plain sums."""

from math import pi

import numpy as np
import pytest
from scipy.optimize import brentq

from conetone.reference.plane import PARTS, WITH_LOGARITHM, law_of_the_plane, number_above


def on_a_grid(steps):
    """Eigenvalues, ascending, of C + Cᵀ on a grid of midpoints of the unit square, light-cone coordinates.

    The kernel of C is 1 where both coordinates of the second point are larger, and a factor 1/2 less for each
    that is equal.
    """
    integration = (np.triu(np.ones((steps, steps)), 1) + 0.5 * np.eye(steps)) / steps
    c = np.kron(integration, integration)
    return np.linalg.eigvalsh(c + c.T)


def test_the_symmetric_parts_by_quadrature():
    # the midpoint rule is off by even powers of the step: one step of Richardson's takes the first away
    coarse, fine = on_a_grid(16), on_a_grid(32)
    for part, sign in (("symmetric-positive", 1), ("symmetric-negative", -1)):
        found = [np.sort(sign * values)[::-1][:14] for values in (coarse, fine)]
        extrapolated = (4 * found[1] - found[0]) / 3
        law = law_of_the_plane(part, 14)
        assert (np.abs(extrapolated / law - 1) < 4e-3).all()
        assert (np.abs(extrapolated[:2] / law[:2] - 1) < 5e-6).all()


def plain_singular_values(count):
    m = 4 * count
    products = [(a - 0.5) * (b - 0.5) for a in range(1, m) for b in range(1, m // a + 1)]
    return 1 / (pi**2 * np.sort(products)[:count])


def test_singular_values_by_a_plain_list():
    np.testing.assert_allclose(law_of_the_plane("singular", 200), plain_singular_values(200), rtol=1e-14)
    expected = [0.405285, 0.135095, 0.135095, 0.081057, 0.081057]
    np.testing.assert_allclose(law_of_the_plane("singular", 5), expected, atol=5e-7)
    law = law_of_the_plane("singular", 100)
    assert law[9] == pytest.approx(0.0450316, abs=5e-8)
    assert law[99] == pytest.approx(0.00587369, abs=5e-9)


def test_local_slopes_of_the_singular_values():
    """Far from the exponent 1 at any rank that can be measured: what the logarithm does."""
    law = law_of_the_plane("singular", 1000)
    for (first, last), slope in {(5, 20): 0.838, (11, 50): 0.834, (21, 100): 0.842, (51, 200): 0.857,
                                 (201, 1000): 0.878}.items():  # fmt: skip
        ranks = np.arange(first, last + 1)
        found = -np.polyfit(np.log(ranks), np.log(law[first - 1 : last]), 1)[0]
        assert found == pytest.approx(slope, abs=6e-4)


def test_the_antisymmetric_part_by_roots():
    roots = [brentq(lambda x: np.sin(x) - 2 * x * np.cos(x), 0.5, pi / 2)]
    for m in range(1, 60):
        roots += [m * pi, brentq(lambda x: np.sin(x) - 2 * x * np.cos(x), m * pi, (m + 0.5) * pi)]
    expected = 1 / (2 * np.sort(roots))
    np.testing.assert_allclose(law_of_the_plane("antisymmetric", 100), expected[:100], rtol=1e-12)
    # Johnston 2010; Afshordi et al. 2012
    printed = [0.428978, 0.159155, 0.108596, 0.079577, 0.064186]
    np.testing.assert_allclose(law_of_the_plane("antisymmetric", 5), printed, atol=5e-7)


def plain_sum(x, last=400_001):
    """Σ tan(π x/2p)/p over odd p, its tail with tan z = z: Σ 1/p² beyond P is 1/(2P)."""
    p = np.arange(1, last, 2.0)
    return (np.tan(pi * x / (2 * p)) / p).sum() + pi * x / 2 / (2 * last - 2)


@pytest.mark.parametrize(("part", "level"), [("symmetric-positive", pi / 4), ("symmetric-negative", -pi / 4)])
def test_roots_and_multiplicities_of_one_sign(part, level):
    law = law_of_the_plane(part, 80)
    x = 2 / (pi**2 * law)
    whole = np.round(x)
    at_poles = np.abs(x - whole) < 1e-9
    for m in range(1, int(x[-1]), 2):
        divisors = sum(m % p == 0 for p in range(1, m + 1))
        assert (at_poles & (whole == m)).sum() == 2 * divisors - 1
        roots = x[~at_poles & (x > m - 2) & (x < m)]
        assert len(roots) == (0 if m == 1 and level < 0 else 1)
        for root in roots:
            assert plain_sum(root) == pytest.approx(level, abs=1e-9)
    assert (whole[at_poles] % 2 == 1).all()


def test_positive_and_negative_eigenvalues_interlace_with_the_unperturbed_ones():
    """2 S ⊗ S has 2/(π² p q) twice for each p, q, of either sign; the rest has rank one and is positive."""
    products = sorted(p * q for p in range(1, 400, 2) for q in range(1, 400 // p + 1, 2) for _ in range(2))
    unperturbed = 2 / (pi**2 * np.array(products, dtype=float))
    count = 150
    positive = law_of_the_plane("symmetric-positive", count)
    negative = law_of_the_plane("symmetric-negative", count)
    room = 1 + 1e-12
    assert (positive * room >= unperturbed[:count]).all()
    assert (positive[1:] <= room * unperturbed[: count - 1]).all()
    assert (negative <= room * unperturbed[:count]).all()
    assert (negative * room >= unperturbed[1 : count + 1]).all()


def test_both_signs_together():
    signs = [law_of_the_plane(f"symmetric-{sign}", 300) for sign in ("positive", "negative")]
    expected = np.sort(np.concatenate(signs))[::-1][:300]
    np.testing.assert_allclose(law_of_the_plane("symmetric", 300), expected, rtol=1e-12)


def test_traces():
    # Of ordered pairs of points 1/4 have i ≺ j: that is Σ s²/n², and half of Σ λ²/n² over all eigenvalues of
    # either part, so that positive ones of i(C − Cᵀ) have 1/4. What is left beyond rank r is about r λ_r².
    for part, total in {"symmetric": 1 / 2, "singular": 1 / 4, "antisymmetric": 1 / 4}.items():
        law = law_of_the_plane(part, 1500)
        assert 0 < total - (law**2).sum() < 2 * len(law) * law[-1] ** 2


@pytest.mark.parametrize("part", PARTS)
def test_the_mean_law_counts_them(part):
    law = law_of_the_plane(part, 1500)
    assert law.shape == (1500,)
    assert (np.diff(law) <= 0).all()
    for rank in (100, 500, 1500):
        # half a multiplet either way, and the error term of the divisor problem
        assert abs(number_above(part, float(law[rank - 1])) / rank - 1) < 3 / rank**0.6


@pytest.mark.parametrize("part", PARTS)
def test_any_number_of_them(part):
    longest = law_of_the_plane(part, 60)
    for count in (1, 2, 3, 7, 59):
        np.testing.assert_allclose(law_of_the_plane(part, count), longest[:count], rtol=1e-12)


def test_only_the_antisymmetric_law_is_a_plain_power():
    assert set(PARTS) - WITH_LOGARITHM == {"antisymmetric"}


def test_what_has_no_law_is_refused():
    with pytest.raises(ValueError, match="no law of part hermitian; known are symmetric, "):
        law_of_the_plane("hermitian", 3)
    with pytest.raises(ValueError, match="no law of part hermitian"):
        number_above("hermitian", 0.1)
    with pytest.raises(ValueError, match="a law of 0 eigenvalues"):
        law_of_the_plane("singular", 0)
