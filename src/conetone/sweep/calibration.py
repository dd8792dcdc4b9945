"""The jobs of a calibration: injections into every series of a sweep, in blocks, and their coverage."""

from collections.abc import Mapping
from dataclasses import dataclass
from functools import cached_property
from math import ceil
from pathlib import Path

from conetone.aggregate.coverage import holds_logarithm
from conetone.aggregate.truths import truths_for
from conetone.sweep import cost
from conetone.sweep.paths import (
    CALIBRATION_TABLE,
    FIGURE_FOLDER,
    FIGURE_SUFFIXES,
    closing_path,
    injections_path,
)
from conetone.sweep.plan import Job, Plan
from conetone.sweep.points import Series
from conetone.sweep.requests import Calibrated, CoverageRequest, FitRequest, InjectRequest

STAGES = ("inject", "coverage")
DEFAULT_INJECTIONS = 400
# Long enough that reading the spectra does not matter.
BLOCK_SECONDS = 120.0


@dataclass(frozen=True)
class Calibration:
    """A sweep's plan with so many injections of every truth into every series; their seed."""

    plan: Plan
    injections: int
    seed: int

    @cached_property
    def jobs(self) -> Mapping[str, Mapping[str, Job]]:
        """Every job by stage and name, those of the sweep, whose spectra are taken up, among them."""
        inject = [job for series in self.plan.series for job in self._inject(series)]
        jobs = {**self.plan.jobs, "inject": {job.name: job for job in inject}}
        return {**jobs, "coverage": {"all": self._coverage()}}

    def missing(self, folder: Path, stage: str | None = None) -> list[Job]:
        """Jobs of the calibration, of one stage or of both, some of whose outputs do not exist."""
        return [
            job
            for name in ([stage] if stage else STAGES)
            for job in self.jobs[name].values()
            if not all((folder / output).exists() for output in job.outputs)
        ]

    def job(self, stage: str, name: str) -> Job:
        """One job of the calibration."""
        return self.jobs[stage][name]

    @property
    def spectra(self) -> list[Path]:
        """What a calibration begins with."""
        return [path for job in self.plan.jobs["fit"].values() for path in job.inputs]

    @property
    def outputs(self) -> list[Path]:
        """Every output of a calibration's jobs."""
        return [path for stage in STAGES for job in self.jobs[stage].values() for path in job.outputs]

    def _fit(self, series: Series) -> tuple[FitRequest, Job]:
        job = self.plan.job("fit", series.name)
        assert isinstance(job.request, FitRequest)
        return job.request, job

    def _truths(self, series: Series) -> tuple[str, ...]:
        logarithm = holds_logarithm(self._fit(series)[0].windows.models)
        return tuple(truths_for(logarithm=logarithm, dimension=series.choice.dimension))

    def _inject(self, series: Series) -> list[Job]:
        fit, fit_job = self._fit(series)
        seconds, length = self._seconds(fit), self._length(series)
        # spectra of all sizes, measured and injected, and what the fit makes of them
        memory = cost.injection_mib(sum(n * r for n, r in zip(self._ranks, fit.replicates, strict=True)))
        jobs = []
        for truth in self._truths(series):
            for number, first in enumerate(range(0, self.injections, length)):
                stop = min(first + length, self.injections)
                jobs.append(
                    Job(
                        "inject",
                        f"{series.name}.{truth}.{number}",
                        InjectRequest(fit, self.plan.sweep.extrapolation, truth, self.seed, first, stop),
                        fit_job.inputs,
                        (injections_path(series.name, truth, number),),
                        cost.START_SECONDS + (stop - first + 1) * seconds,
                        memory,
                    )
                )
        return jobs

    @property
    def _ranks(self) -> list[int]:
        """Eigenvalues at each size."""
        return [2 * each.count if each.count else size for size, each in self.plan.spectra.items()]

    def _seconds(self, fit: FitRequest) -> float:
        return cost.injection_seconds(self._ranks, fit.replicates)

    def _length(self, series: Series) -> int:
        """Injections of one block; it does not depend on how many there are, so that blocks keep theirs."""
        return max(1, int(BLOCK_SECONDS / self._seconds(self._fit(series)[0])))

    def _coverage(self) -> Job:
        series = tuple(
            Calibrated(each.name, self._truths(each), ceil(self.injections / self._length(each)))
            for each in self.plan.series
        )
        inputs = [path for each in series for path in injections_paths(each)]
        figure = [FIGURE_FOLDER / f"{CALIBRATION_TABLE}{suffix}" for suffix in FIGURE_SUFFIXES]
        outputs = (closing_path(CALIBRATION_TABLE), *figure)
        request = CoverageRequest(series, self.injections)
        return Job("coverage", "all", request, tuple(inputs), outputs, cost.CLOSING_SECONDS)


def injections_paths(each: Calibrated) -> list[Path]:
    """The tables of one series, truth by truth."""
    return [injections_path(each.series, truth, k) for truth in each.truths for k in range(each.blocks)]
