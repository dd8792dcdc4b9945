"""Models of log λ against rank, all linear in their parameters, the second of which is the exponent."""

from collections.abc import Callable, Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from conetone.fit.windows import RankAxis

Floats = NDArray[np.float64]
# A function of ranks and of the size n.
Term = Callable[[Floats, float], Floats]

# Position of the exponent among the parameters of every model.
EXPONENT = 1


@dataclass(frozen=True)
class Model:
    """log λ(r) = offset(r) + Σ_k parameter_k · term_k(r); terms[0] is 1, terms[1] is −log r.

    `prior_widths` holds a width for each further parameter: a Gaussian prior about zero.
    """

    name: str
    terms: tuple[Term, ...]
    meaning: str
    prior_widths: tuple[float, ...] = ()
    offset: Term | None = None

    def __post_init__(self) -> None:
        if len(self.prior_widths) != len(self.terms) - 2:
            raise ValueError(f"model {self.name} needs one prior width for each parameter after the exponent")

    @property
    def parameters(self) -> int:
        """Number of free parameters."""
        return len(self.terms)

    def design(self, axis: RankAxis, size: float) -> Floats:
        """Terms as the axis sees them, shape (axis.count, parameters).

        Averaging the terms as the data are averaged makes the model exact in bins of any width.
        """
        return np.stack([axis.of(_at(term, size)) for term in self.terms], axis=-1)

    def offset_on(self, axis: RankAxis, size: float) -> Floats:
        """What has no parameter, shape (axis.count,)."""
        return axis.of(_at(self.offset, size)) if self.offset else np.zeros(axis.count)


def _at(term: Term, size: float) -> Callable[[Floats], Floats]:
    return lambda ranks: term(ranks, size)


def _one(ranks: Floats, size: float) -> Floats:
    return np.ones_like(ranks)


def _falling_log(ranks: Floats, size: float) -> Floats:
    return -np.log(ranks)


def _inverse(ranks: Floats, size: float) -> Floats:
    return 1 / ranks


def _share(ranks: Floats, size: float) -> Floats:
    return ranks / size


# If r(x) = x (log x + κ) eigenvalues exceed A/x, then λ_r = A W(r e^κ)/r, with Lambert's W: a logarithm to
# the first power. Counted as products p q of odd numbers are, κ = 2γ + 4 log 2 − 1 = 2.93; where each stands
# twice, log 2 less, 2.23; four times, log 4 less, 1.54 (all three in `reference/plane.py`). The middle one
# serves as κ, and a term with a prior takes the difference.
KAPPA = 2.23


def _lambert(ranks: Floats) -> Floats:
    from scipy.special import lambertw  # slow to import, and few series need it

    return np.asarray(lambertw(ranks * np.exp(KAPPA)).real)


def _log_of_lambert(ranks: Floats, size: float) -> Floats:
    return np.log(_lambert(ranks))


def _change_with_kappa(ranks: Floats, size: float) -> Floats:
    """∂ log W(r e^κ) / ∂κ = 1/(1 + W)."""
    return 1 / (1 + _lambert(ranks))


# Sampling n points perturbs the Gram matrix of the eigenfunctions by ε_ij ~ n^−1/2. To second order log λ_i
# moves by (1/n) Σ_j 2 μ_j²/(μ_i² − μ_j²) where overlaps are one, which for μ_j ∝ j^−α is C r/n with
# C = −(π/α) cot(π/2α): 0, 2.4, 4.7, 6.9 for α = 1, 3/4, 2/3, 5/8 (derived here).
KNEE_WIDTH = 10.0

POWER = (_one, _falling_log)
MODELS: Mapping[str, Model] = {
    model.name: model
    for model in (
        Model("power", POWER, "log λ = log A − α log r"),
        # A rank counted from 1/2 or from 2 instead of 1 is a = ±α/2 or ±α: the correction is of order one.
        Model(
            "top-correction",
            (*POWER, _inverse),
            "log λ = log A − α log r + a/r, with |a| of order 1",
            prior_widths=(1.0,),
        ),
        Model(
            "knee",
            (*POWER, _share),
            "log λ = log A − α log r + b r/n, with |b| of order 10",
            prior_widths=(KNEE_WIDTH,),
        ),
        Model(
            "top-and-knee",
            (*POWER, _inverse, _share),
            "both corrections",
            prior_widths=(1.0, KNEE_WIDTH),
        ),
        Model(
            "logarithm",
            (*POWER, _change_with_kappa),
            "λ = A r^−α W(r e^κ), W the Lambert function: a logarithm to the first power, κ near 2.2",
            prior_widths=(1.0,),
            offset=_log_of_lambert,
        ),
        Model(
            "logarithm-and-knee",
            (*POWER, _change_with_kappa, _share),
            "the same with the factor exp(b r/n)",
            prior_widths=(1.0, KNEE_WIDTH),
            offset=_log_of_lambert,
        ),
    )
}
# Fitted where nothing else is asked for: theory says which series hold a logarithm.
POWER_MODELS = ("power", "top-correction", "knee", "top-and-knee")
LOGARITHM_MODELS = ("logarithm", "logarithm-and-knee")
