"""Points, operators and series: what a sweep expands into, with canonical text and readable ids."""

import hashlib
import json
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any, Literal

from conetone.operators.catalogue import Part, spectral_part

Count = Literal["fixed", "poisson"]


def canonical(value: Any) -> str:
    """JSON with sorted keys and no spare space: equal values, equal text."""
    return json.dumps(value, sort_keys=True, separators=(",", ":"), ensure_ascii=True)


def _tag(text: str) -> str:
    return hashlib.sha256(text.encode()).hexdigest()[:8]


@dataclass(frozen=True)
class EnsembleChoice:
    """One ensemble with one value for each of its parameters, and how its elements are counted."""

    ensemble: str
    parameters: tuple[tuple[str, int], ...]
    count: Count

    @property
    def dimension(self) -> int | None:
        """Its spacetime dimension, None where it has none."""
        return dict(self.parameters).get("dimension")

    @property
    def label(self) -> str:
        """For people: `minkowski-diamond, dimension 3`."""
        return ", ".join([self.ensemble, *(f"{name} {value}" for name, value in self.parameters)])

    @property
    def slug(self) -> str:
        """For file names: `minkowski-diamond-dimension3`."""
        return "-".join([self.ensemble, *(f"{name}{value}" for name, value in self.parameters)])

    def as_json(self) -> dict[str, Any]:
        """The choice as JSON values."""
        return {"ensemble": self.ensemble, "parameters": dict(self.parameters), "count": self.count}

    @classmethod
    def from_json(cls, values: Mapping[str, Any]) -> "EnsembleChoice":
        """Inverse of `as_json`; raises KeyError or TypeError for anything else."""
        return cls(values["ensemble"], tuple(sorted(values["parameters"].items())), values["count"])

    def key_columns(self, parameter_names: tuple[str, ...]) -> dict[str, Any]:
        """The ensemble's key columns of every table; parameters it does not have are None."""
        given = dict(self.parameters)
        return {
            "ensemble": self.ensemble,
            "count": self.count,
            **{name: given.get(name) for name in parameter_names},
        }


@dataclass(frozen=True)
class Point:
    """One ensemble with its parameters at one size."""

    choice: EnsembleChoice
    size: int

    @property
    def canonical(self) -> str:
        """Canonical JSON; the seeds of the point's replicates are derived from it."""
        return canonical(self.as_json())

    @property
    def name(self) -> str:
        """Readable and unique: `minkowski-diamond-dimension3-n256-1a2b3c4d`."""
        return f"{self.choice.slug}-n{self.size}-{_tag(self.canonical)}"

    def as_json(self) -> dict[str, Any]:
        """The point as JSON values."""
        return {**self.choice.as_json(), "size": self.size}

    @classmethod
    def from_json(cls, values: Mapping[str, Any]) -> "Point":
        """Inverse of `as_json`."""
        return cls(EnsembleChoice.from_json(values), values["size"])


@dataclass(frozen=True)
class OperatorChoice:
    """One part of one matrix."""

    matrix: str
    part: Part

    @property
    def name(self) -> str:
        """For people and file names: `causal-antisymmetric`."""
        return f"{self.matrix}-{self.part}"

    @property
    def spectral(self) -> "OperatorChoice":
        """The operator that is diagonalised for it: `causal-symmetric` for `causal-symmetric-positive`."""
        return OperatorChoice(self.matrix, spectral_part(self.part))


@dataclass(frozen=True)
class Series:
    """One ensemble with its parameters and one operator, across sizes; it ends in one exponent."""

    choice: EnsembleChoice
    operator: OperatorChoice

    @property
    def name(self) -> str:
        """Readable and unique: `minkowski-diamond-dimension3-causal-antisymmetric-1a2b3c4d`."""
        return f"{self.choice.slug}-{self.operator.name}-{_tag(canonical(self.as_json()))}"

    def as_json(self) -> dict[str, Any]:
        """The series as JSON values."""
        return {**self.choice.as_json(), "matrix": self.operator.matrix, "part": self.operator.part}

    @classmethod
    def from_json(cls, values: Mapping[str, Any]) -> "Series":
        """Inverse of `as_json`."""
        return cls(EnsembleChoice.from_json(values), OperatorChoice(values["matrix"], values["part"]))

    def key_columns(self, parameter_names: tuple[str, ...]) -> dict[str, Any]:
        """The series' key columns of every table."""
        return {
            "series": self.name,
            **self.choice.key_columns(parameter_names),
            "matrix": self.operator.matrix,
            "part": self.operator.part,
        }
