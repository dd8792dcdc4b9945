"""Sprinklings into the two-dimensional diamond against exact laws: singular values, both signs of C + Cᵀ.

The laws are derived in conetone.reference.plane; convergence of spectra of sprinklings over n to those of the
integral operator is Koltchinskii & Giné 2000, Bernoulli 6, 113.
"""

import numpy as np
import pytest

from conetone.diagonalise.leading import leading_spectrum
from conetone.fit.ranking import ranked_magnitudes
from conetone.operators.catalogue import OPERATORS, spectral_part
from conetone.reference.plane import law_of_the_plane
from conetone.sprinkle.minkowski import minkowski_diamond

ELEMENTS, RANKS = 2500, 24
SEEDS = range(6)
# Multiplets of the law are split by sampling and its values spread: compared are means over these ranks.
GROUPS = {
    "symmetric-positive": ((1,), (2,), (3,), (4, 5, 6), (7,), range(8, 25)),
    "symmetric-negative": ((1,), (2,), (3, 4, 5), (6,), (7, 8, 9), range(10, 25)),
    "singular": ((1,), (2, 3), (4, 5), (6, 7), (8, 9, 10), range(11, 25)),
}


@pytest.fixture(scope="module")
def spectra():
    """Leading spectra of the same sprinklings, by diagonalised part."""
    orders = [minkowski_diamond(ELEMENTS, np.random.default_rng(seed), dimension=2) for seed in SEEDS]
    products = [OPERATORS["causal"].product(order, 1) for order in orders]
    return {
        part: [leading_spectrum(product, part, RANKS, tolerance=1e-6).eigenvalues for product in products]
        for part in ("symmetric", "singular")
    }


@pytest.mark.parametrize("part", GROUPS)
def test_leading_values_are_those_of_the_law(spectra, part):
    of_part = spectra[spectral_part(part)]
    magnitudes = np.array([ranked_magnitudes(values, part, count=RANKS) for values in of_part])
    law = law_of_the_plane(part, RANKS)
    for ranks in GROUPS[part]:
        at = np.array(ranks) - 1
        found = magnitudes[:, at].mean(axis=1) / ELEMENTS
        error = found.std(ddof=1) / np.sqrt(len(found))
        # taking out an element moves an eigenvalue by order one: of a mean over n that is 1/n, twice for both
        shift = 2 / ELEMENTS
        assert abs(found.mean() - law[at].mean()) < 5 * error + shift
        assert error < 0.02 * law[at].mean()
