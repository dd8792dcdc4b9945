"""Exponents of one size from logs along a rank axis: every window and model, with delete-one copies."""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from conetone.fit.leastsquares import LinearFit, generalised_least_squares, weighted_least_squares
from conetone.fit.logs import RankedLogs
from conetone.fit.models import EXPONENT, Model
from conetone.fit.shrinkage import shrunk_correlation_copies
from conetone.fit.windows import Window

Floats = NDArray[np.float64]
Weighting = Literal["diagonal", "correlated"]

# Points that a fit must have beyond its parameters, so that its misfit can be judged.
SPARE_BINS = 2
# Standard errors of log λ are not believed below this; exactly regular orders have none at all.
SMALLEST_ERROR = 1e-9
# Newton's steps to the scatter, which settles in about six.
MOST_STEPS, SETTLED = 50, 1e-10


@dataclass(frozen=True)
class Estimates:
    """One exponent estimated again and again: entry 0 from all replicates, entry 1 + i without replicate i.

    `exponent`, `statistical` (standard error from the scatter of replicates), `misfit` (further error from
    steps that no model describes) and `chi2` (steps included) have shape (1 + replicates,).
    """

    exponent: Floats
    statistical: Floats
    misfit: Floats
    chi2: Floats


@dataclass(frozen=True)
class PowerLawFit:
    """A model fitted in a window: its estimates, and what model averaging needs to know of it.

    `parameters` of the fit to all replicates; `fitted` is the model at every point of the data vector
    (NaN outside the window); `bins_cut` counts the points of the shared data vector outside the window.
    """

    estimates: Estimates
    parameters: Floats
    fitted: Floats
    degrees: int
    bins_cut: int


@dataclass(frozen=True)
class DataVector:
    """Logs of one size along a rank axis, ready to be fitted in any window.

    `means` and `errors` have shape (1 + replicates, points): of all replicates, then without each in turn;
    `correlations` (1 + replicates, points, points), shrunk, if fits shall weigh by them, else None.
    `scatter`, shape (1 + replicates,), is the standard deviation τ of log λ about the best of the models,
    over all points, that the errors do not explain: multiplets of a symmetric region come in steps. It is
    common to all fits, so that they share one data vector and one measure of its noise.
    """

    data: RankedLogs
    size: float
    means: Floats
    errors: Floats
    scatter: Floats
    correlations: Floats | None = None

    @classmethod
    def of(
        cls, data: RankedLogs, size: float, models: Sequence[Model], weighting: Weighting = "diagonal"
    ) -> "DataVector":
        """Delete-one means, errors and scatter; at least two replicates and four points are needed.

        Of two replicates the copies have no scatter of their own and reuse the errors of both.
        """
        means, errors = _delete_one_moments(data.values)
        errors = np.maximum(errors, SMALLEST_ERROR)
        correlations = shrunk_correlation_copies(data.values) if weighting == "correlated" else None
        fittable = [model for model in models if data.axis.count > model.parameters]
        scatters = [_unexplained_scatter(model, data, size, means, errors) for model in fittable]
        return cls(data, size, means, errors, np.min(scatters, axis=0), correlations)


def fit_power_law(vector: DataVector, model: Model, window: Window) -> PowerLawFit | None:
    """Fit a model to the points inside a window; None if there are too few of them for it.

    Replicates are the unit of resampling: eigenvalues of one matrix are strongly correlated, so the
    statistical error of the exponent is the scatter, over replicates, of the same linear functional of
    their logs. The misfit is what the unexplained scatter τ adds, or that about this fit if it is larger,
    independent from point to point.
    """
    data = vector.data
    inside = data.axis.inside(window)
    points = inside.stop - inside.start
    if points < model.parameters + SPARE_BINS:
        return None
    design = model.design(data.axis, vector.size)[inside]
    offset = model.offset_on(data.axis, vector.size)[inside]
    fit = _fit(vector, model, design, offset, inside)
    gain = fit.gain[:, EXPONENT, :points]
    fitted = np.full(data.axis.count, np.nan)
    fitted[inside] = design @ fit.parameters[0] + offset
    return PowerLawFit(
        Estimates(
            exponent=fit.parameters[:, EXPONENT],
            statistical=_delete_one_errors_of_projections(gain, data.values[:, inside]),
            misfit=np.maximum(vector.scatter, _own_scatter(vector, design, offset, fit, inside))
            * np.linalg.norm(gain, axis=-1),
            chi2=fit.chi2,
        ),
        parameters=fit.parameters[0],
        fitted=fitted,
        degrees=points + len(model.prior_widths) - model.parameters,
        bins_cut=data.axis.count - points,
    )


def _fit(vector: DataVector, model: Model, design: Floats, offset: Floats, inside: slice) -> LinearFit:
    values, errors = vector.means[:, inside] - offset, vector.errors[:, inside]
    scatter = vector.scatter[:, np.newaxis]
    if vector.correlations is None:
        return weighted_least_squares(*_with_priors(model, design, values, np.hypot(errors, scatter)))
    covariance = vector.correlations[:, inside, inside] * errors[:, :, np.newaxis] * errors[:, np.newaxis, :]
    diagonal = np.arange(values.shape[1])
    covariance[:, diagonal, diagonal] += scatter**2
    design, values, errors = _with_priors(model, design, values, np.ones_like(values))
    whole = np.zeros((*errors.shape, errors.shape[1]))
    every = np.arange(errors.shape[1])
    whole[:, every, every] = errors**2
    whole[:, : len(diagonal), : len(diagonal)] = covariance
    return generalised_least_squares(design, values, whole)


def _own_scatter(vector: DataVector, design: Floats, offset: Floats, fit: LinearFit, inside: slice) -> Floats:
    """Scatter of the means about a fit, shape (1 + replicates,).

    Noise common to all ranks makes standard errors large and hides from τ what a fit leaves over, while it
    does not enter the scatter of exponents: residuals tell of a misfit that χ² does not see.
    """
    residuals = vector.means[:, inside] - offset - fit.parameters @ design.T
    degrees = design.shape[0] - design.shape[1]
    return np.asarray(np.sqrt((residuals**2).sum(axis=-1) / degrees))


def _with_priors(
    model: Model, design: Floats, values: Floats, errors: Floats
) -> tuple[Floats, Floats, Floats]:
    """Append one pseudo-measurement, 0 ± width, for each parameter that has a prior."""
    rows = np.eye(model.parameters)[2:]
    shape = (len(values), len(rows))
    return (
        np.concatenate([design, rows]),
        np.concatenate([values, np.zeros(shape)], axis=1),
        np.concatenate([errors, np.broadcast_to(model.prior_widths, shape)], axis=1),
    )


def _unexplained_scatter(
    model: Model, data: RankedLogs, size: float, means: Floats, errors: Floats
) -> Floats:
    """τ such that χ² of a model over all points, with variances error² + τ², equals its degrees of freedom.

    0 where χ² is below at τ = 0. The estimator of Paule & Mandel (1982); means and errors
    (copies, points), result (copies,).
    """
    design, values = model.design(data.axis, size), means - model.offset_on(data.axis, size)
    degrees = data.axis.count - model.parameters + len(model.prior_widths)

    variance = np.zeros(len(means))
    for _ in range(MOST_STEPS):
        total = np.sqrt(errors**2 + variance[:, np.newaxis])
        fit = weighted_least_squares(*_with_priors(model, design, values, total))
        residuals = values - fit.parameters @ design.T
        falling = (residuals**2 / total**4).sum(axis=-1)  # −∂χ²/∂τ², parameters being stationary
        # Newton's step for 1/χ² = 1/ν, which is nearly linear in τ², never past 0
        step = fit.chi2 * (fit.chi2 / degrees - 1) / np.where(falling > 0, falling, np.inf)
        moved = np.maximum(variance + step, 0)
        settled = np.abs(moved - variance) <= SETTLED * moved
        variance = moved
        if settled.all():
            break
    return np.sqrt(variance)


def _delete_one_moments(values: Floats) -> tuple[Floats, Floats]:
    """Means and standard errors of (replicates, m) values: of all, then without each; (1 + replicates, m)."""
    count = len(values)
    centred = values - values.mean(axis=0)
    square_sum = (centred**2).sum(axis=0)
    means = np.concatenate([[np.zeros(values.shape[1])], -centred / (count - 1)]) + values.mean(axis=0)
    full = np.sqrt(square_sum / (count - 1) / count)
    if count == 2:
        return means, np.broadcast_to(full, means.shape)
    # removing x changes the sum of squares about the mean by −(x − mean)² n/(n − 1)
    left = np.maximum(square_sum - centred**2 * count / (count - 1), 0)
    return means, np.concatenate([[full], np.sqrt(left / (count - 2) / (count - 1))])


def _delete_one_errors_of_projections(gain: Floats, values: Floats) -> Floats:
    """Standard error of gain · mean(values), each copy with its own gain and its own replicates."""
    projected = gain @ values.T  # (1 + replicates, replicates)
    count = len(values)
    errors = np.empty(len(gain))
    errors[0] = projected[0].std(ddof=1) / np.sqrt(count)
    if count == 2:
        errors[1:] = errors[0]
        return errors
    kept = projected[1:][~np.eye(count, dtype=bool)].reshape(count, count - 1)
    errors[1:] = kept.std(axis=1, ddof=1) / np.sqrt(count - 1)
    return errors
