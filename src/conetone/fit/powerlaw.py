"""Exponents of binned spectra of one size: every window and model, with delete-one jackknife copies."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from conetone.fit.leastsquares import weighted_least_squares
from conetone.fit.models import EXPONENT, MODELS, Model
from conetone.fit.ranking import BinnedLogs
from conetone.fit.windows import Window

Floats = NDArray[np.float64]

# Bins that a fit must have beyond its parameters, so that its misfit can be judged.
SPARE_BINS = 2
# Standard errors of log λ are not believed below this; exactly regular orders have none at all.
SMALLEST_ERROR = 1e-9
# Halvings of the bracket in which the scatter is sought: to 1e−9 of its upper end.
HALVINGS = 30


@dataclass(frozen=True)
class Estimates:
    """One exponent estimated again and again: entry 0 from all replicates, entry 1 + i without replicate i.

    `exponent`, `statistical` (standard error from the scatter of replicates), `misfit` (further error from
    steps that no model describes) and `chi2` (diagonal, steps included) have shape (1 + replicates,).
    """

    exponent: Floats
    statistical: Floats
    misfit: Floats
    chi2: Floats


@dataclass(frozen=True)
class PowerLawFit:
    """A model fitted in a window: its estimates, and what model averaging needs to know of it.

    `parameters` of the fit to all replicates; `fitted` is the model at every bin of the data vector
    (NaN outside the window); `bins_cut` counts the bins of the shared data vector outside the window.
    """

    estimates: Estimates
    parameters: Floats
    fitted: Floats
    degrees: int
    bins_cut: int


@dataclass(frozen=True)
class DataVector:
    """Binned logs of one size, ready to be fitted in any window.

    `means` and `errors` have shape (1 + replicates, bins): of all replicates, then without each in turn.
    `scatter`, shape (1 + replicates,), is the standard deviation τ of log λ about a power law over all bins
    that the errors do not explain: multiplets of a symmetric region come in steps. It is common to all fits,
    so that they share one data vector and one measure of its noise.
    """

    data: BinnedLogs
    means: Floats
    errors: Floats
    scatter: Floats

    @classmethod
    def of(cls, data: BinnedLogs) -> "DataVector":
        """Delete-one means, errors and scatter; at least two replicates and four bins are needed.

        Of two replicates the copies have no scatter of their own and reuse the errors of both.
        """
        means, errors = _delete_one_moments(data.values)
        errors = np.maximum(errors, SMALLEST_ERROR)
        return cls(
            data, means, errors, _unexplained_scatter(MODELS["power"].design(data.bins), means, errors)
        )


def fit_power_law(vector: DataVector, model: Model, window: Window) -> PowerLawFit | None:
    """Fit a model to the bins inside a window; None if there are too few bins for it.

    Replicates are the unit of resampling: eigenvalues of one matrix are strongly correlated, so the
    statistical error of the exponent is the scatter, over replicates, of the same linear functional of
    their binned logs. The misfit is what the unexplained scatter τ, independent from bin to bin, adds.
    """
    data = vector.data
    inside = data.bins.inside(window)
    bins = inside.stop - inside.start
    if bins < model.parameters + SPARE_BINS:
        return None
    design = model.design(data.bins)[inside]
    errors = np.hypot(vector.errors[:, inside], vector.scatter[:, np.newaxis])
    fit = weighted_least_squares(*_with_priors(model, design, vector.means[:, inside], errors))
    gain = fit.gain[:, EXPONENT, :bins]
    fitted = np.full(data.bins.count, np.nan)
    fitted[inside] = design @ fit.parameters[0]
    return PowerLawFit(
        Estimates(
            exponent=fit.parameters[:, EXPONENT],
            statistical=_delete_one_errors_of_projections(gain, data.values[:, inside]),
            misfit=vector.scatter * np.linalg.norm(gain, axis=-1),
            chi2=fit.chi2,
        ),
        parameters=fit.parameters[0],
        fitted=fitted,
        degrees=bins + len(model.prior_widths) - model.parameters,
        bins_cut=data.bins.count - bins,
    )


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


def _unexplained_scatter(design: Floats, means: Floats, errors: Floats) -> Floats:
    """τ such that χ² with variances error² + τ² equals its degrees of freedom; 0 where it is below at τ = 0.

    The estimator of Paule & Mandel (1982), by bisection; means and errors (copies, bins), result (copies,).
    """
    degrees = len(design) - design.shape[1]

    def excess(variance: Floats) -> Floats:
        total = np.sqrt(errors**2 + variance[:, np.newaxis])
        return np.asarray(weighted_least_squares(design, means, total).chi2 - degrees)

    low = np.zeros(len(means))
    # unweighted residuals bound τ²: with it alone, χ² cannot exceed its degrees of freedom
    high = weighted_least_squares(design, means, np.ones_like(means)).chi2 / degrees
    explained = excess(low) <= 0
    for _ in range(HALVINGS):
        middle = (low + high) / 2
        above = excess(middle) > 0
        low, high = np.where(above, middle, low), np.where(above, high, middle)
    return np.where(explained, 0.0, np.sqrt((low + high) / 2))


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
