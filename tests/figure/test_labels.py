"""Words on figures."""

import numpy as np
import pytest

from conetone.figure.labels import (
    ensemble_label,
    inverse_power,
    magnitudes_label,
    operator_label,
    text_inches,
    wrapped,
)
from conetone.figure.panels import columns_of
from conetone.figure.style import theme
from conetone.sweep.points import OperatorChoice

NBSP = "\N{NO-BREAK SPACE}"
PROSE = (
    "Sprinkling into a flat diamond, $\\log |\\lambda_r|$ against rank, pseudoextraordinarily long words too"
)


@pytest.fixture(autouse=True)
def _theme():
    with theme():
        yield


@pytest.mark.parametrize(
    ("omega", "expected"),
    [(1.0, "1"), (0.5, "1/2"), (0.25, "1/4"), (1 / 3, "1/3"), (0.75, "3/4"), (0.618, "0.618"), (2.0, "2")],
)
def test_powers_are_fractions_where_they_are(omega: float, expected: str) -> None:
    assert inverse_power(omega) == f"$n^{{-{expected}}}$"


@pytest.mark.parametrize("nothing", [None, float("nan")])
def test_ensembles_in_words(nothing: float | None) -> None:
    keys = {"ensemble": "minkowski-diamond", "dimension": 3, "curvature": nothing}
    assert ensemble_label(keys, ["dimension", "curvature"]) == f"Minkowski diamond, $d${NBSP}={NBSP}3"
    assert ensemble_label(keys, ["curvature"]) == "Minkowski diamond"
    assert (
        ensemble_label(keys | {"curvature": 0.5}, ["curvature"])
        == f"Minkowski diamond, curvature{NBSP}={NBSP}0.5"
    )
    assert ensemble_label(keys | {"ensemble": "my_own-ensemble"}, []) == "My own ensemble"
    assert ensemble_label(keys | {"ensemble": "costs-$5"}, []) == "Costs \\$5"


def test_numbers_of_numpy_count_as_numbers() -> None:
    keys = {"ensemble": "minkowski-box", "dimension": np.int64(2)}
    assert ensemble_label(keys, ["dimension"]) == f"Minkowski box, $d${NBSP}={NBSP}2"


def test_operators_in_words_and_mathematics() -> None:
    """As the schema of the spectra table names the parts; A = A₊ − A₋ if self-adjoint, |M| = (MᵀM)^½."""
    antisymmetric, symmetric = OperatorChoice("causal", "antisymmetric"), OperatorChoice("link", "symmetric")
    assert operator_label(antisymmetric) == r"causal, antisymmetric: $i(C-C^{\mathrm{T}})$"
    assert operator_label(symmetric) == r"link, symmetric: $L+L^{\mathrm{T}}$"
    signs = [OperatorChoice("causal", "symmetric-positive"), OperatorChoice("causal", "symmetric-negative")]
    assert operator_label(signs[0]) == r"causal, symmetric-positive: $(C+C^{\mathrm{T}})_{+}$"
    assert operator_label(signs[1]) == r"causal, symmetric-negative: $(C+C^{\mathrm{T}})_{-}$"
    assert operator_label(OperatorChoice("link", "singular")) == "link, singular: $|L|$"
    assert magnitudes_label(signs[1]) == r"eigenvalues $|\lambda_r|$ of $(C+C^{\mathrm{T}})_{-}$"
    assert magnitudes_label(OperatorChoice("link", "singular")) == "singular values $s_r$ of $L$"
    assert operator_label(OperatorChoice("my_own", "symmetric")).startswith(
        "my_own, symmetric: $\\mathrm{my-own}"
    )


@pytest.mark.parametrize("inches", [0.7, 1.0, 2.0, 9.0])
def test_wrapped_lines_fit_and_lose_nothing(inches: float) -> None:
    lines = wrapped(PROSE, inches, 8.0).split("\n")
    # mathematics is never broken, so only such a line may be too wide
    assert all(text_inches(line, 8.0) <= inches or line.startswith("$") for line in lines)
    assert "".join(lines).replace(" ", "") == PROSE.replace(" ", "")
    assert any("$\\log |\\lambda_r|$" in line for line in lines)
    assert (len(lines) == 1) == (inches == 9.0)


def test_what_is_cut_off_leaves_an_ellipsis() -> None:
    for inches in np.linspace(0.8, 2.0, 13):
        lines = wrapped(PROSE, inches, 8.0, lines=2).split("\n")
        assert len(lines) == 2
        assert lines[-1].endswith("…")
        assert lines[-1].count("$") % 2 == 0
        assert text_inches(lines[-1], 8.0) <= inches


def test_short_and_empty_texts_stay_as_they_are() -> None:
    assert wrapped("short", 3.0, 8.0) == "short"
    assert wrapped("", 3.0, 8.0) == ""


def test_panels_fill_rows_of_at_most_four() -> None:
    assert [columns_of(n) for n in range(13)] == [1, 1, 2, 3, 2, 3, 3, 4, 4, 3, 4, 4, 4]
