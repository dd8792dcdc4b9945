"""From a band to tridiagonal form by chasing bulges, with Householder reflections (a compiled kernel).

The band of half-width b is kept by columns: band[j, d] is the entry (j + d, j), d = 0 … b. Each sweep
clears one column below its first subdiagonal; the reflection fills a bulge b rows further down, whose
first column the next reflection clears, and so on to the end (Murata & Horikoshi 1975). About 6 n² b
operations.

Reflections are I − τ v vᵀ with v[0] = 1.
"""

import numpy as np
from numpy.typing import NDArray

from conetone.kernels import kernel, reassociating_inner

Floats = NDArray[np.float64]


@kernel("void(float64[:, ::1], float64)", reassociate=True)
def chase_bulges(band: Floats, sign: float) -> None:
    """Make a symmetric (sign 1) or skew-symmetric (sign −1) band tridiagonal, in place.

    `band`, shape (n, 2 b), holds the band in band[:, : b + 1] and zeros beyond. Afterwards band[:, 0] is the
    diagonal and band[:-1, 1] the entries below it. Of a skew band, band[:, 0] must be zero.
    """
    n = band.shape[0]
    b = band.shape[1] // 2
    v, following, work = np.zeros(b), np.zeros(b), np.zeros(b)
    for j in range(n - 2):
        row, length = j + 1, min(b, n - 1 - j)
        column = band[j, 1 : 1 + length]
        scale = _reflect(column, v)
        while length > 0:
            _both_sides(band, row, length, v, scale, sign, work)
            below = min(b, n - row - length)
            if below > 0:
                scale = _pass_on(band, row, length, below, v, scale, following, work)
            row, length = row + length, below
            v, following = following, v


@reassociating_inner
def _reflect(x: Floats, v: Floats) -> float:
    """Reflect x onto its first entry, in place; fills v and returns τ."""
    rest = 0.0
    for i in range(1, len(x)):
        rest += x[i] * x[i]
    v[0] = 1.0
    if rest == 0.0:
        for i in range(1, len(x)):
            v[i] = 0.0
        return 0.0
    first = x[0]
    reflected = -np.copysign(np.sqrt(first * first + rest), first)
    factor = 1.0 / (first - reflected)
    x[0] = reflected
    for i in range(1, len(x)):
        v[i] = x[i] * factor
        x[i] = 0.0
    return float((reflected - first) / reflected)


@reassociating_inner
def _both_sides(band: Floats, row: int, length: int, v: Floats, scale: float, sign: float, w: Floats) -> None:
    """D ← H D H for the diagonal block of `length` rows from `row`: two columns at a time, lower triangle."""
    for i in range(length):
        w[i] = 0.0
    even = length // 2 * 2
    for c in range(0, even, 2):
        rest = length - c - 2
        v0, v1 = v[c], v[c + 1]
        left, right = band[row + c, 2 : 2 + rest], band[row + c + 1, 1 : 1 + rest]
        v_rest, w_rest = v[c + 2 : length], w[c + 2 : length]
        sum0, sum1 = 0.0, 0.0
        for i in range(rest):
            w_rest[i] += v0 * left[i] + v1 * right[i]
            sum0 += left[i] * v_rest[i]
            sum1 += right[i] * v_rest[i]
        between = band[row + c, 1]
        w[c] += sign * (sum0 + between * v1) + band[row + c, 0] * v0
        w[c + 1] += sign * sum1 + between * v0 + band[row + c + 1, 0] * v1
    if even < length:
        w[even] += band[row + even, 0] * v[even]
    dot = 0.0
    for i in range(length):
        w[i] *= scale
        dot += w[i] * v[i]
    if sign > 0:
        for i in range(length):
            w[i] -= 0.5 * scale * dot * v[i]
    for c in range(0, even, 2):
        rest = length - c - 1
        band[row + c, 0] -= (1 + sign) * w[c] * v[c]
        left, right = band[row + c, 1 : 1 + rest], band[row + c + 1, :rest]
        v_rest, w_rest = v[c + 1 : length], w[c + 1 : length]
        v0, v1, w0, w1 = v[c], v[c + 1], sign * w[c], sign * w[c + 1]
        for i in range(rest):
            wi, vi = w_rest[i], v_rest[i]
            left[i] -= wi * v0 + vi * w0
            right[i] -= wi * v1 + vi * w1
    if even < length:
        band[row + even, 0] -= (1 + sign) * w[even] * v[even]


@reassociating_inner
def _pass_on(
    band: Floats, row: int, length: int, below: int, v: Floats, scale: float, u: Floats, x: Floats
) -> float:
    """E ← G E H for the block E of `below` rows under the diagonal block; G clears E's first column.

    Fills u with the vector of G and returns its τ. E's column c begins at distance length − c.
    """
    for i in range(below):
        x[i] = 0.0
    four = length // 4 * 4
    for c in range(0, four, 4):
        d = length - c
        e0, e1 = band[row + c, d : d + below], band[row + c + 1, d - 1 : d - 1 + below]
        e2, e3 = band[row + c + 2, d - 2 : d - 2 + below], band[row + c + 3, d - 3 : d - 3 + below]
        v0, v1, v2, v3 = v[c], v[c + 1], v[c + 2], v[c + 3]
        for i in range(below):
            x[i] += (v0 * e0[i] + v1 * e1[i]) + (v2 * e2[i] + v3 * e3[i])
    for c in range(four, length):
        e0, v0 = band[row + c, length - c : length - c + below], v[c]
        for i in range(below):
            x[i] += v0 * e0[i]
    first = band[row, length : length + below]
    for i in range(below):
        x[i] *= scale
        first[i] -= x[i]
    scale_of_u = _reflect(first, u)
    dot = 0.0
    for i in range(below):
        dot += x[i] * u[i]
    odd = 1 + (length - 1) // 2 * 2
    for c in range(1, odd, 2):
        d = length - c
        e0, e1 = band[row + c, d : d + below], band[row + c + 1, d - 1 : d - 1 + below]
        v0, v1 = v[c], v[c + 1]
        sum0, sum1 = 0.0, 0.0
        for i in range(below):
            sum0 += e0[i] * u[i]
            sum1 += e1[i] * u[i]
        # what the left reflection takes off, of the column after the right one: (e − x v_c) · u
        sum0, sum1 = scale_of_u * (sum0 - v0 * dot), scale_of_u * (sum1 - v1 * dot)
        for i in range(below):
            xi, ui = x[i], u[i]
            e0[i] -= xi * v0 + ui * sum0
            e1[i] -= xi * v1 + ui * sum1
    if odd < length:
        e0, v0 = band[row + odd, length - odd : length - odd + below], v[odd]
        sum0 = 0.0
        for i in range(below):
            sum0 += e0[i] * u[i]
        sum0 = scale_of_u * (sum0 - v0 * dot)
        for i in range(below):
            e0[i] -= x[i] * v0 + u[i] * sum0
    return scale_of_u
