"""All fits of one size: both estimators, every window and model; or the reason why there are none."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any, get_args

import numpy as np
from numpy.typing import NDArray

from conetone.fit.logs import Estimator, RankedLogs, bin_logs, smooth_logs
from conetone.fit.models import MODELS
from conetone.fit.powerlaw import SPARE_BINS, DataVector, PowerLawFit, Weighting, fit_power_law
from conetone.fit.smoothcount import ranks_of_windows
from conetone.fit.windows import Growth, Window, WindowRule, bins_of_windows

Floats = NDArray[np.float64]
ESTIMATORS: tuple[Estimator, ...] = get_args(Estimator)
# One window and model.
Candidate = tuple[WindowRule, str]


@dataclass(frozen=True)
class WindowSettings:
    """The grid of windows, what is fitted in them and how; the exponent of `estimator` is the one quoted."""

    rules: tuple[WindowRule, ...]
    smallest_rank: int
    bins: int
    models: tuple[str, ...]
    estimator: Estimator = "smooth-count"
    weighting: Weighting = "diagonal"

    @property
    def candidates(self) -> list[Candidate]:
        """Every window with every model."""
        return [(rule, model) for rule in self.rules for model in self.models]

    def as_json(self) -> dict[str, Any]:
        """The settings as JSON values, the rules as text."""
        return {
            "rules": [[str(rule.first), str(rule.last)] for rule in self.rules],
            "smallest_rank": self.smallest_rank,
            "bins": self.bins,
            "models": list(self.models),
            "estimator": self.estimator,
            "weighting": self.weighting,
        }

    @classmethod
    def from_json(cls, values: Mapping[str, Any]) -> "WindowSettings":
        """Inverse of `as_json`."""
        return cls(
            tuple(WindowRule(Growth.parse(first), Growth.parse(last)) for first, last in values["rules"]),
            values["smallest_rank"],
            values["bins"],
            tuple(values["models"]),
            values["estimator"],
            values["weighting"],
        )


@dataclass(frozen=True)
class SizeSpectra:
    """Falling spectra of the replicates of one size; `complete` if no eigenvalue is missing below."""

    size: int
    magnitudes: Sequence[Floats]
    complete: bool


@dataclass(frozen=True)
class SizeFits:
    """What one estimator makes of one size: its data vector and a fit, or None, for every window and model.

    Without a data vector there is no fit, for the `reason` given.
    """

    size: int
    replicates: int
    vector: DataVector | None
    fits: Mapping[Candidate, PowerLawFit | None] = field(default_factory=dict)
    reason: str | None = None


def fit_size(spectra: SizeSpectra, settings: WindowSettings, estimator: Estimator) -> SizeFits:
    """Fit every window and model to the spectra of one size."""
    replicates = len(spectra.magnitudes)
    if replicates < 2:
        return _none(spectra, f"{replicates} usable replicates; an error bar takes two")
    ranks = min(len(magnitudes) for magnitudes in spectra.magnitudes)
    windows = {
        rule: window
        for rule in settings.rules
        if (window := rule.at(spectra.size, settings.smallest_rank)).last <= ranks + 1
        and window.first < window.last
    }
    if not windows:
        return _none(spectra, f"{ranks} ranks with non-zero eigenvalues, fewer than any window takes")
    data: RankedLogs | None
    if estimator == "rank-bins":
        bins = bins_of_windows(list(windows.values()), settings.bins)
        data = bin_logs(spectra.magnitudes, bins) if bins else None
    else:
        windows, data = _smooth(spectra, windows, settings.bins)
        if data is None:
            return _none(spectra, f"the smooth count of {ranks} eigenvalues does not reach the windows")
    models = [MODELS[name] for name in settings.models]
    needed = min(model.parameters for model in models) + SPARE_BINS
    if data is None or data.axis.count < needed:
        kind = "bins of rank" if estimator == "rank-bins" else "smooth ranks"
        return _none(spectra, f"{data.axis.count if data else 0} {kind} in the windows; a fit takes {needed}")
    vector = DataVector.of(data, spectra.size, models, settings.weighting)
    fits = {
        (rule, name): fit_power_law(vector, MODELS[name], windows[rule]) if rule in windows else None
        for rule, name in settings.candidates
    }
    return SizeFits(spectra.size, replicates, vector, fits)


def _none(spectra: SizeSpectra, reason: str) -> SizeFits:
    return SizeFits(spectra.size, len(spectra.magnitudes), None, reason=reason)


def _smooth(
    spectra: SizeSpectra, windows: dict[WindowRule, Window], points: int
) -> tuple[dict[WindowRule, Window], RankedLogs | None]:
    """The windows whose upper ends the smooth counts of all spectra reach, and the logs in them."""
    while windows:
        axis = ranks_of_windows(list(windows.values()), points)
        data = smooth_logs(spectra.magnitudes, axis, complete=spectra.complete)
        reached = axis.ranks[np.isfinite(data.values).all(axis=0)]
        farthest = float(reached[-1]) if reached.size else 0.0
        kept = {rule: window for rule, window in windows.items() if window.last <= farthest}
        if len(kept) == len(windows):
            return windows, data
        windows = kept
    return {}, None
