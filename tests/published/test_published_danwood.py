"""Least squares against certified values: NIST StRD, data set DanWood."""

import numpy as np
import pytest

from conetone.fit.leastsquares import weighted_least_squares

# Data and certified values of the NIST Statistical Reference Datasets, nonlinear regression, DanWood
# (Daniel & Wood 1980): y = b₁ x^b₂ + e. Data from memory; they reproduce the certified values below.
X = np.array([1.309, 1.471, 1.490, 1.565, 1.611, 1.680])
Y = np.array([2.138, 3.421, 3.597, 4.340, 4.882, 5.660])
B1, B1_ERROR = 0.76886226176, 0.018281973860
B2, B2_ERROR = 3.8604055871, 0.051726610913
RESIDUAL_SUM_OF_SQUARES = 4.3173084083e-3


@pytest.mark.parametrize("start", [(1.0, 5.0), (0.7, 4.0)])  # both starting points of NIST
def test_certified_values(start):
    # Gauss–Newton: with f = exp(X β), y − f ≈ f X δ, so each step is a linear fit of (y − f)/f ± 1/f.
    design = np.column_stack([np.ones_like(X), np.log(X)])
    parameters = np.array([np.log(start[0]), start[1]])
    for _ in range(30):
        curve = np.exp(design @ parameters)
        step = weighted_least_squares(design, (Y - curve) / curve, 1 / curve)
        parameters = parameters + step.parameters
    assert np.abs(step.parameters).max() < 1e-12
    b1, b2 = np.exp(parameters[0]), parameters[1]
    residual_sum = ((Y - b1 * X**b2) ** 2).sum()
    scale = np.sqrt(residual_sum / (len(X) - 2))
    errors = scale * np.sqrt(np.diag(step.covariance)) * [b1, 1]  # the first parameter is log b₁
    assert b1 == pytest.approx(B1, rel=1e-9)
    assert b2 == pytest.approx(B2, rel=1e-9)
    assert errors == pytest.approx([B1_ERROR, B2_ERROR], rel=1e-8)
    assert residual_sum == pytest.approx(RESIDUAL_SUM_OF_SQUARES, rel=1e-9)
    assert step.chi2 == pytest.approx(RESIDUAL_SUM_OF_SQUARES, rel=1e-9)
