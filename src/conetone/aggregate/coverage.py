"""Injection: synthetic spectra of known exponent, fitted as measured ones are; how often errors hold."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtr

from conetone.aggregate.series import SeriesExponent, candidates_of, series_exponent
from conetone.aggregate.truths import Circumstances, Curve, Truth, departure_from_trend
from conetone.fit.logs import Estimator
from conetone.fit.size import SizeSpectra, WindowSettings, fit_size

Floats = NDArray[np.float64]

# True exponents are drawn so far about the measured one, and not below this.
SPREAD, SMALLEST_EXPONENT = 0.1, 0.3
# The share of a normal distribution within one standard deviation and within two.
ONE_SIGMA, TWO_SIGMA = (float(2 * ndtr(sigma) - 1) for sigma in (1, 2))


@dataclass(frozen=True)
class Noise:
    """Fluctuations of the replicates of one size about their mean.

    `departures`: of log λ, shape (replicates, ranks), over the ranks that all of them have.
    """

    size: int
    complete: bool
    mean: Floats
    departures: Floats

    @classmethod
    def of(cls, spectra: SizeSpectra) -> "Noise":
        """From the measured spectra of one size; raises ValueError for fewer than two of them."""
        if len(spectra.magnitudes) < 2:
            raise ValueError(f"{len(spectra.magnitudes)} replicates of n = {spectra.size} have no covariance")
        ranks = min(len(magnitudes) for magnitudes in spectra.magnitudes)
        logs = np.log(np.array([magnitudes[:ranks] for magnitudes in spectra.magnitudes]))
        mean = logs.mean(axis=0)
        return cls(spectra.size, spectra.complete, mean, logs - mean)

    @property
    def replicates(self) -> int:
        """How many were measured."""
        return len(self.departures)

    @property
    def ranks(self) -> Floats:
        """1, 2, …, shape (ranks,)."""
        return np.arange(1.0, self.departures.shape[1] + 1)

    def draw(self, generator: np.random.Generator) -> Floats:
        """As many new replicates, with exactly the measured sample covariance; shape (replicates, ranks).

        Σ_i g_i δ_i / √(m − 1) with g_i from N(0, 1).
        """
        count = self.replicates
        mixing = generator.standard_normal((count, count))
        return np.asarray(mixing @ self.departures / np.sqrt(count - 1))

    def spectra(self, curve: Curve, generator: np.random.Generator) -> SizeSpectra:
        """New replicates about a curve, each sorted, as spectra are."""
        logs = curve(self.ranks, self.size) + self.draw(generator)
        magnitudes = np.exp(-np.sort(-logs, axis=1))
        return SizeSpectra(self.size, list(magnitudes), self.complete)


@dataclass(frozen=True)
class Pipeline:
    """Everything between spectra and an exponent at infinite size: the settings of a sweep."""

    windows: WindowSettings
    omegas: tuple[float, ...]
    most_sizes_cut: int

    def exponent(self, spectra: Sequence[SizeSpectra], estimator: Estimator) -> SeriesExponent | None:
        """A series from its spectra, as the stages fit and aggregate treat it; None without any fit."""
        fits = [fit_size(size, self.windows, estimator) for size in spectra]
        fits = [each for each in fits if any(fit is not None for fit in each.fits.values())]
        if not fits:
            return None
        return series_exponent(
            [each.size for each in fits],
            [each.replicates for each in fits],
            candidates_of(fits, self.windows),
            self.omegas,
            self.most_sizes_cut,
        )


@dataclass(frozen=True)
class Ground:
    """A measured series, ready for injections: its noise, by size, and what truths take from it.

    `exponent`: the measured one, about which true ones are drawn.
    """

    noises: tuple[Noise, ...]
    circumstances: Circumstances
    exponent: float
    pipeline: Pipeline

    @classmethod
    def of(cls, spectra: Sequence[SizeSpectra], pipeline: Pipeline) -> "Ground":
        """From measured spectra, sizes rising; raises ValueError where they give no exponent."""
        usable = [size for size in spectra if len(size.magnitudes) > 1]
        measured = pipeline.exponent(usable, pipeline.windows.estimator) if usable else None
        if measured is None or measured.limit is None:
            reason = measured.reason if measured else "no size has a fit"
            raise ValueError(f"the series itself has no exponent: {reason}")
        noises = tuple(Noise.of(size) for size in usable)
        windows, largest = pipeline.windows, noises[-1].size
        last = max(rule.at(largest, windows.smallest_rank).last for rule in windows.rules)
        circumstances = Circumstances(
            sizes=tuple(noise.size for noise in noises),
            reach=last / largest,
            steps={noise.size: departure_from_trend(noise.mean) for noise in noises},
            logarithm=holds_logarithm(windows.models),
        )
        return cls(noises, circumstances, float(measured.limit.value[0]), pipeline)


def holds_logarithm(models: Sequence[str]) -> bool:
    """Whether the models of a series hold a logarithm."""
    return all("logarithm" in model for model in models)


@dataclass(frozen=True)
class Injection:
    """One truth with its exponent and everything else drawn."""

    truth: Truth
    exponent: float
    curve: Curve

    @classmethod
    def draw(cls, truth: Truth, ground: Ground, generator: np.random.Generator) -> "Injection":
        """Draw the exponent, about the measured one or the truth's own, then the rest."""
        about = ground.exponent if truth.about is None else truth.about
        low = max(about - SPREAD, SMALLEST_EXPONENT)
        exponent = float(generator.uniform(low, max(about, low) + SPREAD))
        return cls(truth, exponent, truth.draw(generator, exponent, ground.circumstances))


@dataclass(frozen=True)
class Recovered:
    """What an estimator made of an injection: the exponent at infinite size, or NaN for a reason."""

    value: float
    statistical: float
    systematic: float
    reason: str | None = None

    @property
    def total(self) -> float:
        """Both errors in quadrature."""
        return float(np.hypot(self.statistical, self.systematic))


def inject(injection: Injection, ground: Ground, generator: np.random.Generator) -> list[SizeSpectra]:
    """Synthetic spectra of every size: as many replicates as were measured, with their covariance."""
    return [noise.spectra(injection.curve, generator) for noise in ground.noises]


def run_injection(
    truth: Truth, ground: Ground, generator: np.random.Generator, estimators: Sequence[Estimator]
) -> tuple[Injection, Mapping[Estimator, Recovered]]:
    """Draw an injection and measure it by each of the estimators, from the same spectra."""
    injection = Injection.draw(truth, ground, generator)
    spectra = inject(injection, ground, generator)
    return injection, {each: _recovered(ground.pipeline.exponent(spectra, each)) for each in estimators}


def _recovered(found: SeriesExponent | None) -> Recovered:
    if found is None or found.limit is None:
        reason = found.reason if found else "no size has a fit"
        return Recovered(float("nan"), float("nan"), float("nan"), reason)
    limit = found.limit
    return Recovered(float(limit.value[0]), float(limit.statistical[0]), float(limit.systematic[0]))


@dataclass(frozen=True)
class Proportion:
    """A share of injections with its Wilson interval."""

    value: float
    low: float
    high: float

    @classmethod
    def of(cls, hits: int, count: int, sigmas: float = 1.0) -> "Proportion":
        """From a count of hits, the interval of so many standard deviations; raises ValueError for no count.

        Wilson (1927), J. Am. Stat. Assoc. 22, 209.
        """
        if count < 1:
            raise ValueError("a share of nothing")
        share, z = hits / count, sigmas**2 / count
        centre = (share + z / 2) / (1 + z)
        half = np.sqrt(z * share * (1 - share) + z**2 / 4) / (1 + z)
        return cls(share, max(float(centre - half), 0.0), min(float(centre + half), 1.0))


@dataclass(frozen=True)
class Coverage:
    """How well total errors describe the distance from truth; arrays (injections,)."""

    value: Floats
    total: Floats
    truth: Floats

    @cached_property
    def pulls(self) -> Floats:
        """(value − truth) / total; infinite for a wrong value without an error."""
        error = self.value - self.truth
        with np.errstate(divide="ignore", invalid="ignore"):
            return np.where(error == 0, 0.0, error / np.where(self.total > 0, self.total, 0.0))

    def within(self, sigmas: float, interval: float = 1.0) -> Proportion:
        """Share of truths within so many total errors, its interval of so many standard deviations."""
        return Proportion.of(int((np.abs(self.pulls) <= sigmas).sum()), len(self.pulls), interval)

    @property
    def bias(self) -> float:
        """Mean pull, in total errors."""
        return float(self.pulls.mean())

    @property
    def spread(self) -> float:
        """Standard deviation of the pulls; 1 for normal ones of the right size."""
        return float(self.pulls.std(ddof=1)) if len(self.pulls) > 1 else 0.0

    @property
    def pit(self) -> Floats:
        """Probability integral transform Φ((truth − value)/total), uniform on [0, 1] if errors are right."""
        return np.asarray(ndtr(-self.pulls))

    @property
    def width(self) -> float:
        """Mean total error: half of the mean 68 % interval."""
        return float(self.total.mean())

    @property
    def excess(self) -> float:
        """Errors over those that would cover 68.27 % exactly: above 1 they are wider than need be."""
        needed = float(np.quantile(np.abs(self.pulls), ONE_SIGMA))
        return 1 / needed if needed > 0 else float("inf")
