"""Amplitude laws: exact values, constants, standing, and silence where nothing is known."""

import numpy as np
import pytest

from conetone.reference.amplitudes import expected_amplitude
from conetone.reference.exponents import null_direction_exponent


def test_the_exact_law_of_the_antisymmetric_part():
    law = expected_amplitude("causal", "antisymmetric", "diamond", 2)
    assert (law.standing, law.exponent, law.amplitude) == ("exact", 1.0, None)
    assert "Johnston 2010" in law.source
    found = law.magnitudes(400)
    # Johnston 2010; Afshordi et al. 2012
    np.testing.assert_allclose(found[:5], [0.428978, 0.159155, 0.108596, 0.079577, 0.064186], atol=5e-7)
    x = 1 / (2 * found)
    assert (np.diff(x) > 0).all()
    np.testing.assert_allclose(x[1::2], np.pi * np.arange(1, 201), rtol=1e-13)
    # tan x = 2x without its poles
    np.testing.assert_allclose(np.sin(x[::2]), 2 * x[::2] * np.cos(x[::2]), atol=1e-9)
    ranks = np.arange(1, 401)
    # one root lies just below each (m + ½)π, so 1/(πr) is approached from above, like 1/r
    assert (np.abs(found * np.pi * ranks - 1)[9:] < 1 / ranks[9:]).all()


def test_the_exact_law_of_singular_values():
    # 1/[π²(a − ½)(b − ½)], a, b ≥ 1, in falling order; derived here
    law = expected_amplitude("causal", "singular", "diamond", 2)
    assert law.standing == "exact"
    a, b = np.meshgrid(np.arange(1, 300), np.arange(1, 300))
    expected = np.sort((1 / (np.pi**2 * (a - 0.5) * (b - 0.5))).ravel())[::-1][:100]
    np.testing.assert_allclose(law.magnitudes(100), expected, rtol=1e-12)


@pytest.mark.parametrize(
    ("part", "dimension", "amplitude", "exponent"),
    [
        ("singular", 3, 0.2111, 3 / 4),
        ("singular", 4, 0.0973, 2 / 3),
        ("antisymmetric", 4, 0.0933, 2 / 3),
    ],
)
def test_heuristic_laws_are_powers(part, dimension, amplitude, exponent):
    law = expected_amplitude("causal", part, "diamond", dimension)
    assert (law.standing, law.amplitude, law.part) == ("heuristic", amplitude, part)
    assert law.exponent == pytest.approx(exponent) == null_direction_exponent(dimension)
    np.testing.assert_allclose(law.magnitudes(3), amplitude / np.array([1.0, 2, 3]) ** exponent)


@pytest.mark.parametrize(
    "case",
    [
        ("link", "antisymmetric", "diamond", 2),
        ("causal", "antisymmetric", "box", 2),
        ("causal", "antisymmetric", None, None),
        ("causal", "antisymmetric", "diamond", 3),
        ("causal", "symmetric", "diamond", 4),
        ("causal", "singular", "diamond", 5),
        ("causal", "diagonal", "diamond", 2),
    ],
)
def test_nothing_where_nothing_is_known(case):
    assert expected_amplitude(*case) is None
