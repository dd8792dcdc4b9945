"""Expected exponents: values, standing, and silence where nothing is known."""

import pytest

from conetone.reference.exponents import expected_exponent, holds_logarithm, null_direction_exponent
from conetone.reference.plane import PARTS

# d/(2(d − 1)); derived from fractional integration along null rays, a heuristic.
BY_DIMENSION = {2: 1, 3: 3 / 4, 4: 2 / 3, 5: 5 / 8, 6: 3 / 5, 7: 7 / 12}


@pytest.mark.parametrize(("dimension", "exponent"), BY_DIMENSION.items())
def test_values(dimension, exponent):
    assert null_direction_exponent(dimension) == pytest.approx(exponent, rel=1e-15)
    for region in ("diamond", "box"):
        for part in PARTS:
            found = expected_exponent("causal", part, region, dimension)
            assert found.value == pytest.approx(exponent, rel=1e-15)
            assert found.source


def test_only_the_diamond_in_two_dimensions_is_called_exact():
    exact = [
        (dimension, region, part)
        for dimension in BY_DIMENSION
        for region in ("diamond", "box")
        for part in PARTS
        if expected_exponent("causal", part, region, dimension).standing != "heuristic"
    ]
    assert exact == [(2, "diamond", part) for part in PARTS]
    found = expected_exponent("causal", "antisymmetric", "diamond", 2)
    assert found.standing == "exact"
    assert found.value == 1
    assert "Johnston 2010" in found.source


def test_where_the_law_holds_a_logarithm():
    for dimension in BY_DIMENSION:
        for region in ("diamond", "box"):
            for part in PARTS:
                found = expected_exponent("causal", part, region, dimension)
                assert found.logarithm == (dimension == 2 and part != "antisymmetric")
                assert (found.caveat is not None) == found.logarithm
                assert holds_logarithm("causal", part, dimension) == found.logarithm
    assert not holds_logarithm("link", "singular", 2)
    assert not holds_logarithm("causal", "singular", None)


@pytest.mark.parametrize(
    ("matrix", "region", "dimension"),
    [
        ("link", "diamond", 2),
        ("link", "box", 4),
        ("causal", None, None),
        ("causal", None, 3),
        ("causal", "box", None),
    ],
)
def test_nothing_is_expected_where_nothing_is_known(matrix, region, dimension):
    for part in PARTS:
        assert expected_exponent(matrix, part, region, dimension) is None
