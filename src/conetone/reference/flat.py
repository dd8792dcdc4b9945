"""Sprinklings into flat causal diamonds: expected relations and chains (Myrheim 1978, Meyer 1988)."""

from math import gamma


def chain_coefficient(dimension: float, length: int) -> float:
    """χ_k such that a Poisson sprinkling of N expected elements has N^k χ_k expected k-chains.

    With a fixed number n of elements it is n! / (n − k)! χ_k. Dimensionless. Meyer 1988:
    χ_k = (1/k) (Γ(d+1)/2)^(k−1) Γ(d/2) Γ(d) / [Γ(k d/2) Γ((k+1) d/2)].
    """
    d, k = dimension, length
    return (
        (gamma(d + 1) / 2) ** (k - 1)
        * gamma(d / 2)
        * gamma(d)
        / (k * gamma(k * d / 2) * gamma((k + 1) * d / 2))
    )


def ordering_fraction_of_diamond(dimension: float) -> float:
    """Expected share of related pairs in a flat causal diamond, 2 χ_2; 1/2 in two dimensions."""
    return 2 * chain_coefficient(dimension, 2)
