"""A table of ratios after the benchmarks: each work against what it is held against, in one run."""

from collections.abc import Callable, Iterator
from dataclasses import dataclass, field
from typing import Any

import pytest
from threadpoolctl import threadpool_limits


@dataclass
class Report:
    """Lines for the end of the run: (work, ours, against, ratio, asked for)."""

    ratios: list[tuple[str, str, str, str, str]] = field(default_factory=list)
    growth: list[str] = field(default_factory=list)


REPORT = Report()


@pytest.fixture(autouse=True)
def _one_thread() -> Iterator[None]:
    with threadpool_limits(1):
        yield


@pytest.fixture
def report() -> Report:
    return REPORT


@pytest.fixture
def once(benchmark: Any) -> Callable[..., Any]:
    """Time a call a few times after one that is not timed; returns (its result, its smallest seconds)."""

    def run(
        call: Callable[..., Any], *arguments: Any, rounds: int = 1, warm: bool = True
    ) -> tuple[Any, float]:
        result = benchmark.pedantic(
            call, args=arguments, rounds=rounds, iterations=1, warmup_rounds=int(warm)
        )
        return result, float(benchmark.stats.stats.min)

    return run


def pytest_terminal_summary(terminalreporter: Any) -> None:
    if REPORT.ratios:
        terminalreporter.section("measured, on one core with one BLAS thread where nothing else is said")
        rows = [("work", "here", "against", "ratio", "asked for"), *REPORT.ratios]
        widths = [max(len(row[c]) for row in rows) for c in range(5)]
        for row in rows:
            terminalreporter.write_line(
                "  ".join(cell.ljust(w) for cell, w in zip(row, widths, strict=True)).rstrip()
            )
    if REPORT.growth:
        terminalreporter.section("cost as n grows")
        for line in REPORT.growth:
            terminalreporter.write_line(line)
