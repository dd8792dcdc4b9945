"""Least squares against certified values: NIST StRD, data set Bennett5."""

import numpy as np
import pytest

from conetone.fit.leastsquares import weighted_least_squares

# Data and certified values of the NIST Statistical Reference Datasets, nonlinear regression, Bennett5
# (Bennett, Swartzendruber & Brown, NIST 1994, magnetisation of superconductors), of "higher level of
# difficulty": y = b₁ (b₂ + x)^(−1/b₃) + e. Copied from the file Bennett5.dat as lmfit 1.2.0 ships it.
B1, B1_ERROR = -2523.5058043, 297.15175411
B2, B2_ERROR = 46.736564644, 1.2448871856
B3, B3_ERROR = 0.93218483193, 0.020272299378
RESIDUAL_SUM_OF_SQUARES = 5.2404744073e-4
RESIDUAL_DEVIATION = 1.8629312528e-3
# x y, x y, …
DATA = """
7.447168 -34.834702, 8.102586 -34.3932, 8.452547 -34.152901, 8.711278 -33.979099, 8.916774 -33.845901,
9.087155 -33.732899, 9.23259 -33.640301, 9.359535 -33.5592, 9.472166 -33.486801, 9.573384 -33.4231,
9.665293 -33.365101, 9.749461 -33.313, 9.827092 -33.260899, 9.899128 -33.2174, 9.966321 -33.176899,
10.02928 -33.139198, 10.08851 -33.101601, 10.14443 -33.066799, 10.19738 -33.035, 10.24767 -33.003101,
10.29556 -32.971298, 10.34125 -32.942299, 10.38495 -32.916302, 10.42682 -32.890202, 10.467 -32.864101,
10.50564 -32.841, 10.54283 -32.817799, 10.57869 -32.797501, 10.61331 -32.7743, 10.64678 -32.757,
10.67915 -32.733799, 10.71052 -32.7164, 10.74092 -32.6991, 10.77044 -32.678799, 10.7991 -32.6614,
10.82697 -32.644001, 10.85408 -32.626701, 10.88047 -32.612202, 10.90619 -32.597698, 10.93126 -32.583199,
10.95572 -32.568699, 10.97959 -32.554298, 11.00291 -32.539799, 11.0257 -32.525299, 11.04798 -32.510799,
11.06977 -32.499199, 11.0911 -32.487598, 11.11198 -32.473202, 11.13244 -32.461601, 11.15248 -32.435501,
11.17213 -32.435501, 11.19141 -32.4268, 11.21031 -32.4123, 11.22887 -32.400799, 11.24709 -32.392101,
11.26498 -32.380501, 11.28256 -32.366001, 11.29984 -32.3573, 11.31682 -32.348598, 11.33352 -32.339901,
11.34994 -32.3284, 11.3661 -32.319698, 11.382 -32.311001, 11.39766 -32.2994, 11.41307 -32.290699,
11.42824 -32.282001, 11.4432 -32.2733, 11.45793 -32.264599, 11.47244 -32.256001, 11.48675 -32.247299,
11.50086 -32.238602, 11.51477 -32.2299, 11.52849 -32.224098, 11.54202 -32.215401, 11.55538 -32.2038,
11.56855 -32.198002, 11.58156 -32.1894, 11.59442 -32.183601, 11.607121 -32.1749, 11.61964 -32.169102,
11.632 -32.1633, 11.64421 -32.154598, 11.65628 -32.145901, 11.6682 -32.140099, 11.67998 -32.131401,
11.69162 -32.125599, 11.70313 -32.119801, 11.71451 -32.111198, 11.72576 -32.1054, 11.73688 -32.096699,
11.74789 -32.0909, 11.75878 -32.088001, 11.76955 -32.0793, 11.7802 -32.073502, 11.79073 -32.067699,
11.80116 -32.061901, 11.81148 -32.056099, 11.8217 -32.050301, 11.83181 -32.044498, 11.84182 -32.038799,
11.85173 -32.033001, 11.86155 -32.027199, 11.87127 -32.0243, 11.88089 -32.018501, 11.89042 -32.012699,
11.89987 -32.004002, 11.90922 -32.001099, 11.91849 -31.9953, 11.92768 -31.9895, 11.93678 -31.9837,
11.94579 -31.9779, 11.95473 -31.972099, 11.96359 -31.969299, 11.97237 -31.963501, 11.98107 -31.957701,
11.9897 -31.9519, 11.99826 -31.9461, 12.00674 -31.9403, 12.01515 -31.937401, 12.02349 -31.931601,
12.03176 -31.9258, 12.03997 -31.922899, 12.0481 -31.917101, 12.05617 -31.911301, 12.06418 -31.9084,
12.07212 -31.902599, 12.08001 -31.8969, 12.08782 -31.893999, 12.09558 -31.888201, 12.10328 -31.8853,
12.11092 -31.882401, 12.1185 -31.8766, 12.12603 -31.873699, 12.1335 -31.867901, 12.14091 -31.862101,
12.14827 -31.8592, 12.15557 -31.8563, 12.16283 -31.8505, 12.17003 -31.8447, 12.17717 -31.841801,
12.18427 -31.8389, 12.19132 -31.833099, 12.19832 -31.8302, 12.20527 -31.827299, 12.21217 -31.8216,
12.21903 -31.818701, 12.22584 -31.812901, 12.2326 -31.809999, 12.23932 -31.8071, 12.24599 -31.8013,
12.25262 -31.798401, 12.2592 -31.7955, 12.26575 -31.7897, 12.27224 -31.7868
"""
X, Y = np.array([pair.split() for pair in DATA.split(",")], dtype=float).T


def power_of_shifted(parameters):
    """The curve and its derivatives by log(−b₁), b₂ and 1/b₃."""
    log_amplitude, shift, power = parameters
    curve = -np.exp(log_amplitude - power * np.log(shift + X))
    design = np.column_stack([np.ones_like(X), -power / (shift + X), -np.log(shift + X)])
    return curve, design * curve[:, np.newaxis]


@pytest.mark.parametrize("start", [(-2000, 50, 0.8), (-1500, 45, 0.85)])  # both starting points of NIST
def test_certified_values(start):
    # Levenberg: pseudo-measurements of a step of 0 ± width, wider after every success, keep steps short
    parameters = np.array([np.log(-start[0]), start[1], 1 / start[2]])
    scale, width = np.array([1.0, 10.0, 1.0]), 1e-3
    errors = np.ones(len(X) + 3)
    curve, design = power_of_shifted(parameters)
    for _ in range(300):
        errors[-3:] = width * scale
        step = weighted_least_squares(
            np.vstack([design, np.eye(3)]), np.append(Y - curve, np.zeros(3)), errors
        )
        tried = parameters + step.parameters
        new_curve, new_design = power_of_shifted(tried)
        if ((Y - new_curve) ** 2).sum() <= ((Y - curve) ** 2).sum():
            parameters, curve, design, width = tried, new_curve, new_design, min(3 * width, 1e6)
        else:
            width /= 5
    final = weighted_least_squares(design, Y - curve, np.ones_like(X))
    assert (np.abs(final.parameters) < 1e-8 * np.abs(parameters)).all()

    b1, b2, b3 = -np.exp(parameters[0]), parameters[1], 1 / parameters[2]
    assert [b1, b2, b3] == pytest.approx([B1, B2, B3], rel=1e-8)
    residual_sum = ((Y - curve) ** 2).sum()
    assert residual_sum == pytest.approx(RESIDUAL_SUM_OF_SQUARES, rel=1e-9)
    assert final.chi2 == pytest.approx(RESIDUAL_SUM_OF_SQUARES, rel=1e-9)
    deviation = np.sqrt(residual_sum / (len(X) - 3))
    assert deviation == pytest.approx(RESIDUAL_DEVIATION, rel=1e-9)
    found = deviation * np.sqrt(np.diag(final.covariance)) * [abs(b1), 1, b3**2]
    assert found == pytest.approx([B1_ERROR, B2_ERROR, B3_ERROR], rel=1e-6)


def test_the_data_are_complete():
    assert len(X) == 154
    certified = ((Y - B1 * (B2 + X) ** (-1 / B3)) ** 2).sum()
    assert certified == pytest.approx(RESIDUAL_SUM_OF_SQUARES, rel=1e-6)
