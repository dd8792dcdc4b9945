"""What a job is asked for: one complete request in canonical JSON, never the sweep file.

A request is the single value that Snakemake compares to decide whether a job must run again.
"""

import json
from abc import ABC, abstractmethod
from dataclasses import dataclass
from typing import Any, Self

from conetone.errors import RequestError
from conetone.fit.logs import Estimator
from conetone.fit.size import WindowSettings
from conetone.operators.catalogue import SPECTRAL_PARTS, SpectralPart
from conetone.records.tables import VERSIONS
from conetone.sweep.blocks import Block, blocks_of
from conetone.sweep.points import OperatorChoice, Point, Series, canonical
from conetone.sweep.settings import ExtrapolationSettings, SpectrumSettings


@dataclass(frozen=True)
class Request(ABC):
    """Base of all requests: canonical text, and back."""

    @classmethod
    def stage(cls) -> str:
        """Name of the stage, from the class: `SprinkleRequest` belongs to sprinkle."""
        return cls.__name__.removesuffix("Request").lower()

    @abstractmethod
    def fields(self) -> dict[str, Any]:
        """The request's own fields as JSON values."""

    @classmethod
    @abstractmethod
    def from_fields(cls, fields: dict[str, Any]) -> Self:
        """Inverse of `fields`."""

    def text(self) -> str:
        """Canonical JSON."""
        return canonical({"stage": self.stage(), "version": VERSIONS[self.stage()], **self.fields()})

    @classmethod
    def parse(cls, text: str) -> Self:
        """Read a request; raises RequestError if it is not exactly one of this kind and version."""
        try:
            values = json.loads(text)
            stage, version = values.pop("stage"), values.pop("version")
            request = cls.from_fields(values)
        except (ValueError, TypeError, KeyError, AttributeError) as error:
            raise RequestError(
                "request", f"{text!r} ({error!r})", f"a complete request of {cls.stage()}"
            ) from None
        if (stage, version) != (cls.stage(), VERSIONS[cls.stage()]):
            allowed = f"{cls.stage()} of version {VERSIONS[cls.stage()]}"
            raise RequestError("request", f"{stage} of version {version}", allowed)
        if set(values) != set(request.fields()):
            unknown = ", ".join(sorted(set(values) ^ set(request.fields())))
            raise RequestError(
                "request", f"unknown fields: {unknown}", f"exactly {', '.join(request.fields())}"
            )
        return request


def without_replicates(text: str) -> str:
    """A request's text without its range of replicates or injections: equal for blocks of another length."""
    values = json.loads(text)
    values.pop("injections" if values["stage"] == InjectRequest.stage() else "replicates", None)
    return canonical(values)


@dataclass(frozen=True)
class SprinkleRequest(Request):
    """Draw the orders of one block."""

    point: Point
    root_seed: int
    first: int
    stop: int

    def fields(self) -> dict[str, Any]:  # noqa: D102
        return {
            "point": self.point.as_json(),
            "root_seed": self.root_seed,
            "replicates": [self.first, self.stop],
        }

    @classmethod
    def from_fields(cls, fields: dict[str, Any]) -> Self:  # noqa: D102
        return cls(Point.from_json(fields["point"]), fields["root_seed"], *fields["replicates"])


@dataclass(frozen=True)
class DiagonaliseRequest(Request):
    """Diagonalise one operator of the orders of one block."""

    point: Point
    matrix: str
    part: SpectralPart
    spectrum: SpectrumSettings
    first: int
    stop: int

    def fields(self) -> dict[str, Any]:  # noqa: D102
        return {
            "point": self.point.as_json(),
            "matrix": self.matrix,
            "part": self.part,
            "spectrum": self.spectrum.as_json(),
            "replicates": [self.first, self.stop],
        }

    @classmethod
    def from_fields(cls, fields: dict[str, Any]) -> Self:  # noqa: D102
        point = Point.from_json(fields["point"])
        if fields["part"] not in SPECTRAL_PARTS:
            raise ValueError(f"no spectrum is taken of the part {fields['part']}")
        spectrum = SpectrumSettings.from_json(fields["spectrum"])
        return cls(point, fields["matrix"], fields["part"], spectrum, *fields["replicates"])


@dataclass(frozen=True)
class FitRequest(Request):
    """Fit one series at all its sizes."""

    series: Series
    sizes: tuple[int, ...]
    replicates: tuple[int, ...]
    windows: WindowSettings

    def fields(self) -> dict[str, Any]:  # noqa: D102
        return {
            "series": self.series.as_json(),
            "sizes": list(self.sizes),
            "replicates": list(self.replicates),
            "windows": self.windows.as_json(),
        }

    @classmethod
    def from_fields(cls, fields: dict[str, Any]) -> Self:  # noqa: D102
        return cls(
            Series.from_json(fields["series"]),
            tuple(fields["sizes"]),
            tuple(fields["replicates"]),
            WindowSettings.from_json(fields["windows"]),
        )

    def blocks(self, size: int) -> list[Block]:
        """The blocks whose spectra belong to one size."""
        replicates = self.replicates[self.sizes.index(size)]
        return list(blocks_of(Point(self.series.choice, size), replicates))


@dataclass(frozen=True)
class AggregateRequest(Request):
    """Extrapolate and collect the series, given by name, in the order of the tables."""

    series: tuple[str, ...]
    estimator: Estimator
    extrapolation: ExtrapolationSettings

    def fields(self) -> dict[str, Any]:  # noqa: D102
        return {
            "series": list(self.series),
            "estimator": self.estimator,
            "extrapolation": self.extrapolation.as_json(),
        }

    @classmethod
    def from_fields(cls, fields: dict[str, Any]) -> Self:  # noqa: D102
        return cls(
            tuple(fields["series"]),
            fields["estimator"],
            ExtrapolationSettings.from_json(fields["extrapolation"]),
        )


@dataclass(frozen=True)
class FigureRequest(Request):
    """Draw the figures of the operators named."""

    operators: tuple[OperatorChoice, ...]

    def fields(self) -> dict[str, Any]:  # noqa: D102
        return {"operators": [[operator.matrix, operator.part] for operator in self.operators]}

    @classmethod
    def from_fields(cls, fields: dict[str, Any]) -> Self:  # noqa: D102
        return cls(tuple(OperatorChoice(matrix, part) for matrix, part in fields["operators"]))


@dataclass(frozen=True)
class InjectRequest(Request):
    """Injections first … stop − 1 of one truth into one series, each fitted and extrapolated as measured."""

    fit: FitRequest
    extrapolation: ExtrapolationSettings
    truth: str
    seed: int
    first: int
    stop: int

    def fields(self) -> dict[str, Any]:  # noqa: D102
        return {
            **self.fit.fields(),
            "extrapolation": self.extrapolation.as_json(),
            "truth": self.truth,
            "seed": self.seed,
            "injections": [self.first, self.stop],
            # what is put to the test is the code of these stages
            "tested": [VERSIONS["fit"], VERSIONS["aggregate"]],
        }

    @classmethod
    def from_fields(cls, fields: dict[str, Any]) -> Self:  # noqa: D102
        if fields["tested"] != [VERSIONS["fit"], VERSIONS["aggregate"]]:
            raise ValueError(f"versions {fields['tested']} of the stages tested")
        return cls(
            FitRequest.from_fields(fields),
            ExtrapolationSettings.from_json(fields["extrapolation"]),
            fields["truth"],
            fields["seed"],
            *fields["injections"],
        )

    @property
    def stream(self) -> str:
        """What the random streams of its injections belong to: the series and the truth, nothing else."""
        return canonical({"series": self.fit.series.as_json(), "truth": self.truth})


@dataclass(frozen=True)
class Calibrated:
    """The injections of one series: its truths, each in so many blocks."""

    series: str
    truths: tuple[str, ...]
    blocks: int


@dataclass(frozen=True)
class CoverageRequest(Request):
    """Collect so many injections of every truth and series."""

    series: tuple[Calibrated, ...]
    injections: int

    def fields(self) -> dict[str, Any]:  # noqa: D102
        return {
            "series": [[each.series, list(each.truths), each.blocks] for each in self.series],
            "injections": self.injections,
        }

    @classmethod
    def from_fields(cls, fields: dict[str, Any]) -> Self:  # noqa: D102
        series = tuple(Calibrated(name, tuple(truths), blocks) for name, truths, blocks in fields["series"])
        return cls(series, fields["injections"])
