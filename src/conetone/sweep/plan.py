"""The jobs that a sweep expands into, stage by stage: requests, files, forecasts."""

from collections.abc import Mapping
from dataclasses import dataclass, replace
from functools import cached_property
from math import ceil
from pathlib import Path

from conetone.errors import SweepError
from conetone.fit.models import LOGARITHM_MODELS, POWER_MODELS
from conetone.fit.size import WindowSettings
from conetone.operators.catalogue import spectral_part
from conetone.reference.exponents import holds_logarithm
from conetone.sweep import cost
from conetone.sweep.blocks import Block, blocks_of
from conetone.sweep.definition import Sweep
from conetone.sweep.paths import (
    CLOSING_TABLES,
    PIECE_TABLES,
    closing_path,
    figure_paths,
    orders_path,
    piece_path,
    spectra_path,
)
from conetone.sweep.points import OperatorChoice, Point, Series
from conetone.sweep.requests import (
    AggregateRequest,
    DiagonaliseRequest,
    FigureRequest,
    FitRequest,
    Request,
    SprinkleRequest,
)
from conetone.sweep.settings import SpectrumSettings

STAGES = ("sprinkle", "diagonalise", "fit", "aggregate", "figure")
# Leading spectra of so many elements take minutes and more, and share their products among threads, of which
# Snakemake grants no more than it has cores.
MANY_ELEMENTS, MANY_THREADS = 50_000, 4


@dataclass(frozen=True)
class Job:
    """One job: its stage, its name within the stage, what is asked, what it reads and writes.

    `seconds`, of one core, and `mib` are forecasts. Paths are relative to the sweep's folder.
    """

    stage: str
    name: str
    request: Request
    inputs: tuple[Path, ...]
    outputs: tuple[Path, ...]
    seconds: float
    mib: float = cost.BASE_MIB
    threads: int = 1

    @property
    def memory_mb(self) -> int:
        """The memory forecast as Snakemake's resource, whole megabytes."""
        return ceil(self.mib * 1.048576)


@dataclass(frozen=True)
class Plan:
    """Everything a sweep expands into."""

    sweep: Sweep

    @cached_property
    def points(self) -> list[tuple[Point, int]]:
        """Points with their numbers of replicates."""
        return [
            (Point(choice, size), replicates)
            for choice in self.sweep.choices
            for size, replicates in zip(self.sweep.sizes, self.sweep.replicates, strict=True)
        ]

    @cached_property
    def series(self) -> list[Series]:
        """Every series, in the order of the tables."""
        return [
            Series(choice, operator) for choice in self.sweep.choices for operator in self.sweep.operators
        ]

    @cached_property
    def spectra(self) -> dict[int, SpectrumSettings]:
        """Which eigenvalues are computed, by size."""
        return dict(zip(self.sweep.sizes, self.sweep.spectra, strict=True))

    @cached_property
    def blocks(self) -> list[Block]:
        """Every block of every point."""
        return [block for point, replicates in self.points for block in blocks_of(point, replicates)]

    @cached_property
    def jobs(self) -> Mapping[str, Mapping[str, Job]]:
        """Every job, by stage and name."""
        stages = (self._sprinkle(), self._diagonalise(), self._fit(), [self._aggregate()], [self._figure()])
        return {stage: {job.name: job for job in jobs} for stage, jobs in zip(STAGES, stages, strict=True)}

    def missing(self, folder: Path, stage: str | None = None) -> list[Job]:
        """Jobs, of one stage or of all, some of whose outputs do not exist in a sweep's folder."""
        jobs = self.all_jobs if stage is None else self.jobs[stage].values()
        return [job for job in jobs if not all((folder / output).exists() for output in job.outputs)]

    def job(self, stage: str, name: str) -> Job:
        """One job; raises SweepError for a name that the sweep does not have."""
        try:
            return self.jobs[stage][name]
        except KeyError:
            raise SweepError(f"job of stage {stage}", name, f"a job of the sweep {self.sweep.name}") from None

    @property
    def all_jobs(self) -> list[Job]:
        """Every job, stages in order."""
        return [job for stage in STAGES for job in self.jobs[stage].values()]

    def _sprinkle(self) -> list[Job]:
        return [
            Job(
                "sprinkle",
                block.name,
                SprinkleRequest(block.point, self.sweep.root_seed, block.first, block.stop),
                (),
                (orders_path(block),),
                cost.START_SECONDS + len(block.replicates) * cost.sprinkle_seconds(block.point),
                cost.sprinkle_mib(block.point),
            )
            for block in self.blocks
        ]

    def _diagonalise(self) -> list[Job]:
        # several series may be ranked from one spectrum
        operators = dict.fromkeys(operator.spectral for operator in self.sweep.operators)
        return [self._diagonalise_of(block, operator) for block in self.blocks for operator in operators]

    def _diagonalise_of(self, block: Block, operator: OperatorChoice) -> Job:
        point = block.point
        spectrum = self.spectra[point.size]
        part = spectral_part(operator.part)
        request = DiagonaliseRequest(point, operator.matrix, part, spectrum, block.first, block.stop)
        seconds = len(block.replicates) * cost.diagonalise_seconds(point, operator, spectrum)
        many = point.size >= MANY_ELEMENTS and not spectrum.takes_all(point.size)
        return Job(
            "diagonalise",
            f"{block.name}.{operator.name}",
            request,
            (orders_path(block),),
            (spectra_path(block, operator),),
            cost.START_SECONDS + seconds,
            cost.diagonalise_mib(point, operator, spectrum),
            MANY_THREADS if many else 1,
        )

    def _fit(self) -> list[Job]:
        return [self._fit_of(series) for series in self.series]

    def _fit_of(self, series: Series) -> Job:
        request = FitRequest(series, self.sweep.sizes, self.sweep.replicates, self._windows_of(series))
        inputs = [spectra_path(b, series.operator) for size in request.sizes for b in request.blocks(size)]
        outputs = tuple(piece_path(series.name, table) for table in PIECE_TABLES)
        counts = [2 * each.count if each.count else size for size, each in self.spectra.items()]
        eigenvalues = max(n * r for n, r in zip(counts, request.replicates, strict=True))
        memory = cost.fit_mib(eigenvalues)
        return Job("fit", series.name, request, tuple(inputs), outputs, cost.FIT_SECONDS, memory)

    def _windows_of(self, series: Series) -> WindowSettings:
        """The windows with the models asked for, or those that theory names for this series."""
        windows, operator = self.sweep.windows, series.operator
        if windows.models:
            return windows
        log = holds_logarithm(operator.matrix, operator.part, series.choice.dimension)
        return replace(windows, models=LOGARITHM_MODELS if log else POWER_MODELS)

    def _aggregate(self) -> Job:
        names = tuple(series.name for series in self.series)
        inputs = tuple(piece_path(name, table) for name in names for table in PIECE_TABLES)
        outputs = tuple(closing_path(table) for table in CLOSING_TABLES)
        request = AggregateRequest(names, self.sweep.windows.estimator, self.sweep.extrapolation)
        return Job("aggregate", "all", request, inputs, outputs, cost.FIT_SECONDS)

    def _figure(self) -> Job:
        inputs = tuple(closing_path(table) for table in CLOSING_TABLES)
        outputs = tuple(figure_paths(self.sweep.operators))
        return Job(
            "figure", "all", FigureRequest(self.sweep.operators), inputs, outputs, cost.CLOSING_SECONDS
        )
