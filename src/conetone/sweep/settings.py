"""How a sweep is diagonalised, fitted and extrapolated, resolved; light, because every job reads it."""

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any, Literal

Extent = Literal["full", "leading"]
Solver = Literal["auto", "two-stage", "lapack"]
# With fewer elements than this for each eigenvalue of one sign, and some more, there is no room for the
# vectors that find the ends of a spectrum; a full one is quicker then.
ELEMENTS_A_LEADING, MORE_ELEMENTS = 8, 96


def smallest_for(count: int) -> int:
    """The smallest matrix of which `count` eigenvalues of each sign are found without the others."""
    return ELEMENTS_A_LEADING * count + MORE_ELEMENTS


@dataclass(frozen=True)
class SpectrumSettings:
    """Which eigenvalues are computed at one size, and how.

    `count` of each sign, with residuals up to `tolerance` times the norm; both None for the full spectrum.
    `solver` is of full spectra. `why`, for people, says what decided.
    """

    extent: Extent
    count: int | None
    tolerance: float | None
    solver: Solver
    why: str = field(default="", compare=False)

    def __post_init__(self) -> None:
        """Raise ValueError for an extent that does not go with the other fields."""
        leading = self.count is not None and self.tolerance is not None
        whole = self.count is None and self.tolerance is None
        if not (leading if self.extent == "leading" else whole and self.extent == "full"):
            raise ValueError(f"{self.extent} with count {self.count} and tolerance {self.tolerance}")

    def takes_all(self, elements: int) -> bool:
        """Whether every eigenvalue of a matrix of this size is computed, and perhaps only the ends kept."""
        return self.count is None or elements < smallest_for(self.count)

    def as_json(self) -> dict[str, Any]:
        """The settings as JSON values."""
        return {
            "extent": self.extent,
            "count": self.count,
            "tolerance": self.tolerance,
            "solver": self.solver,
        }

    @classmethod
    def from_json(cls, values: Mapping[str, Any]) -> "SpectrumSettings":
        """Inverse of `as_json`."""
        return cls(values["extent"], values["count"], values["tolerance"], values["solver"])


@dataclass(frozen=True)
class ExtrapolationSettings:
    """The set of ω, and how many of the smallest sizes may be left out."""

    omegas: tuple[float, ...]
    most_sizes_cut: int

    def as_json(self) -> dict[str, Any]:
        """The settings as JSON values."""
        return {"omegas": list(self.omegas), "most_sizes_cut": self.most_sizes_cut}

    @classmethod
    def from_json(cls, values: Mapping[str, Any]) -> "ExtrapolationSettings":
        """Inverse of `as_json`."""
        return cls(tuple(values["omegas"]), values["most_sizes_cut"])
