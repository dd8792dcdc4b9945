"""How a sweep is fitted and extrapolated, resolved; light, because every job reads it."""

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

from conetone.fit.windows import Growth, WindowRule


@dataclass(frozen=True)
class WindowSettings:
    """The grid of windows, and what is fitted in them."""

    rules: tuple[WindowRule, ...]
    smallest_rank: int
    bins: int
    models: tuple[str, ...]

    def as_json(self) -> dict[str, Any]:
        """The settings as JSON values, the rules as text."""
        rules = [[str(rule.first), str(rule.last)] for rule in self.rules]
        return {
            "rules": rules,
            "smallest_rank": self.smallest_rank,
            "bins": self.bins,
            "models": list(self.models),
        }

    @classmethod
    def from_json(cls, values: Mapping[str, Any]) -> "WindowSettings":
        """Inverse of `as_json`."""
        rules = tuple(WindowRule(Growth.parse(first), Growth.parse(last)) for first, last in values["rules"])
        return cls(rules, values["smallest_rank"], values["bins"], tuple(values["models"]))


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
