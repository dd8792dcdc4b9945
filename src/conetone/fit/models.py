"""Models of log λ against rank, all linear in their parameters, the second of which is the exponent."""

from collections.abc import Callable, Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from conetone.fit.windows import RankBins

Floats = NDArray[np.float64]

# Position of the exponent among the parameters of every model.
EXPONENT = 1


@dataclass(frozen=True)
class Model:
    """log λ(r) = Σ_k parameter_k · term_k(r); terms[0] is 1, terms[1] is −log r.

    `prior_widths` holds a width for each further parameter: a Gaussian prior about zero.
    """

    name: str
    terms: tuple[Callable[[Floats], Floats], ...]
    meaning: str
    prior_widths: tuple[float, ...] = ()

    def __post_init__(self) -> None:
        if len(self.prior_widths) != len(self.terms) - 2:
            raise ValueError(f"model {self.name} needs one prior width for each parameter after the exponent")

    @property
    def parameters(self) -> int:
        """Number of free parameters."""
        return len(self.terms)

    def design(self, bins: RankBins) -> Floats:
        """Terms averaged over each bin, shape (bins, parameters).

        Averaging the terms as the data are averaged makes the model exact in bins of any width.
        """
        ranks = np.arange(1, bins.last + 1, dtype=np.float64)
        return np.stack([bins.average(term(ranks)) for term in self.terms], axis=-1)


def _one(ranks: Floats) -> Floats:
    return np.ones_like(ranks)


def _falling_log(ranks: Floats) -> Floats:
    return -np.log(ranks)


def _inverse(ranks: Floats) -> Floats:
    return 1 / ranks


MODELS: Mapping[str, Model] = {
    model.name: model
    for model in (
        Model("power", (_one, _falling_log), "log λ = log A − α log r"),
        # A rank counted from 1/2 or from 2 instead of 1 is a = ±α/2 or ±α: the correction is of order one.
        Model(
            "top-correction",
            (_one, _falling_log, _inverse),
            "log λ = log A − α log r + a/r, with |a| of order one",
            prior_widths=(1.0,),
        ),
    )
}
