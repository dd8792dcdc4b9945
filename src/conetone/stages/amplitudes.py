"""Rows of `amplitudes`: cut-offs at fixed smooth rank and infinite size, against the amplitude laws."""

from math import gamma
from typing import Any

import numpy as np
from numpy.typing import NDArray

from conetone.aggregate.amplitudes import amplitudes_at_infinite_size, finite_size_coefficient
from conetone.fit.smoothcount import REACH, log_cutoffs
from conetone.records.tables import Row
from conetone.reference.amplitudes import AmplitudeLaw, expected_amplitude
from conetone.sprinkle.catalogue import ENSEMBLES

Floats = NDArray[np.float64]

# Nearer to the end of a spectrum than n over this, cut-offs are no line in 1/n.
DEEPEST = 8
# Copies of a mean of two replicates have no scatter of their own.
FEWEST_REPLICATES, FEWEST_SIZES = 3, 3
# Eigenvalues of a law for each smooth rank wanted: its smooth count is completed beyond them.
LAW_LENGTH = 4 * REACH


def amplitude_rows(keys: dict[str, Any], cutoffs: list[dict[str, Any]], most_sizes_cut: int) -> list[Row]:
    """One row for each smooth rank that at least three sizes reach, the largest among them."""
    cutoffs = [row for row in cutoffs if DEEPEST * row["smooth_rank"] <= row["size"]]
    sizes = sorted({row["size"] for row in cutoffs if len(row["copies"]) >= FEWEST_REPLICATES})
    by_place = {(row["size"], row["smooth_rank"]): row for row in cutoffs}
    ranks = [
        rank
        for rank in sorted({row["smooth_rank"] for row in cutoffs})
        if sum((size, rank) in by_place for size in sizes) >= FEWEST_SIZES and (sizes[-1], rank) in by_place
    ]
    if not ranks:
        return []
    logs = [_logs(size, ranks, by_place) for size in sizes]
    found = amplitudes_at_infinite_size(sizes, logs, most_sizes_cut)
    law = expected_amplitude(
        keys["matrix"], keys["part"], ENSEMBLES[keys["ensemble"]].region, keys["dimension"]
    )
    expected = _law_at(law, np.array(ranks)) if law else np.full(len(ranks), np.nan)
    deviation = found.deviation_from(np.exp(expected))
    rows: list[Row] = []
    for i, rank in enumerate(ranks):
        if not np.isfinite(found.value[i]):
            continue
        cutoff = float(np.exp(found.value[i]))
        known = law is not None and bool(np.isfinite(expected[i]))
        rows.append(
            {
                **keys,
                "smooth_rank": rank,
                "cutoff": cutoff,
                "statistical": cutoff * float(found.statistical[i]),
                "systematic": cutoff * float(found.systematic[i]),
                "slope": float(found.coefficient[i]),
                "slope_statistical": float(found.coefficient_statistical[i]),
                "slope_systematic": float(found.coefficient_systematic[i]),
                "slope_expected": _slope_of_cutoffs(law.exponent) * rank if law else None,
                "law": float(np.exp(expected[i])) if known else None,
                "law_standing": law.standing if law and known else None,
                "law_source": law.source if law and known else None,
                "deviation": float(deviation[i]) if known else None,
            }
        )
    return rows


def _logs(size: int, ranks: list[float], by_place: dict[tuple[int, float], dict[str, Any]]) -> Floats:
    """Means of log(Λ/n), of all replicates and without each, (1 + replicates, ranks); NaN out of reach."""
    replicates = max(len(row["copies"]) for (s, _), row in by_place.items() if s == size)
    logs = np.full((1 + replicates, len(ranks)), np.nan)
    for i, rank in enumerate(ranks):
        if (size, rank) in by_place:
            row = by_place[size, rank]
            logs[:, i] = [row["log_cutoff"], *row["copies"]]
    return logs


def _slope_of_cutoffs(exponent: float) -> float:
    """Shift of log Λ at smooth rank ρ in units of ρ/n, where log λ_r shifts by C r/n.

    A cut-off moves by the mean shift of the eigenvalues about it, weighted by 2z e^−z with z = (Λ/λ_r)²: its
    mean rank is ρ Γ(1 + 1/α)/Γ(1 + 1/2α)² (derived here).
    """
    mean_rank = gamma(1 + 1 / exponent) / gamma(1 + 1 / (2 * exponent)) ** 2
    return finite_size_coefficient(exponent) * mean_rank


def _law_at(law: AmplitudeLaw, ranks: Floats) -> Floats:
    """log(Λ/n) of a law at smooth ranks, smoothed as the data are."""
    return log_cutoffs(law.magnitudes(int(LAW_LENGTH * ranks[-1]) + 8), ranks, complete=False)
