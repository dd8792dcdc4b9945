"""What the finished results of a sweep tell about its replicates: their scatter, by size, and their cost."""

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np

from conetone.aggregate.allocate import Design
from conetone.aggregate.scatter import ReplicateVariance, replicate_variance
from conetone.errors import UsageError
from conetone.records.files import read_rows
from conetone.sweep import cost
from conetone.sweep.paths import closing_path
from conetone.sweep.plan import Job, Plan
from conetone.sweep.requests import DiagonaliseRequest, SprinkleRequest

FIT_COLUMNS = ["series", "size", "replicates_used", "replicates_attempted"]
# Later stages take seconds whatever the replicates.
COSTLY_STAGES = ("sprinkle", "diagonalise")


@dataclass(frozen=True)
class SizeCost:
    """Seconds of one core that a replicate of one size takes, all ensembles and operators together.

    `source` says whether they are measured (`at most` where threads shared the work, whose wall time alone is
    known); `done` replicates are in the tables of all of them.
    """

    seconds: float
    source: str
    done: int


@dataclass(frozen=True)
class Pilot:
    """Rows of `exponents` with copies, the design made of them, and why other series are left out."""

    rows: list[dict[str, Any]]
    design: Design
    costs: list[SizeCost]
    left_out: dict[str, str]

    @property
    def done(self) -> list[int]:
        """Replicates finished, by size."""
        return [each.done for each in self.costs]

    @property
    def without_a_say(self) -> list[int]:
        """Positions of sizes that enter no exponent."""
        return [int(i) for i in np.flatnonzero((self.design.variance == 0).all(axis=0))]


def read_pilot(plan: Plan, folder: Path, floor: int, run_first: str) -> Pilot:
    """Read the finished results of a sweep; no size gets fewer replicates than `floor` or than it has.

    Raises UsageError, with the advice `run_first`, if there are none or of other series or sizes, if a size
    has fewer than two replicates, or if no series has an exponent.
    """
    exponents = folder / closing_path("exponents")
    if not exponents.exists():
        allowed = "the finished results of a pilot, a few replicates of every size"
        raise UsageError(str(folder), "no results yet", allowed, run_first)
    rows = {row["series"]: row for row in read_rows(exponents)}
    attempted = _attempted(plan, folder, set(rows), run_first)
    kept: list[dict[str, Any]] = []
    variances: list[ReplicateVariance] = []
    left_out: dict[str, str] = {}
    for series in plan.series:
        row = rows[series.name]
        label = f"{series.choice.label}, {series.operator.matrix} {series.operator.part}"
        if row["status"] != "ok" or not row["copies"] or not np.isfinite(row["copies"]).all():
            left_out[label] = row["reason"] or "the pilot has no copies of its exponent"
            continue
        kept.append({**row, "label": label})
        sizes, of_series = np.array(plan.sweep.sizes), attempted[series.name]
        variances.append(
            replicate_variance(np.array(row["copies"]), np.array(row["copies_size"]), sizes, of_series)
        )
    if not kept:
        reason = "; ".join(f"{label}: {why}" for label, why in left_out.items())
        advice = "give the pilot three sizes or more and 16 replicates of each, and run it again"
        raise UsageError(str(folder), f"no exponent ({reason})", "results with at least one exponent", advice)
    costs = costs_of_sizes(plan, folder)
    design = Design(
        np.array([each.variance for each in variances]),
        np.array([each.log_error for each in variances]),
        np.array([row["systematic"] for row in kept]),
        np.array([each.seconds for each in costs]),
        np.array([max(floor, each.done) for each in costs]),
    )
    return Pilot(kept, design, costs, left_out)


def _attempted(plan: Plan, folder: Path, found: set[str], run_first: str) -> dict[str, Any]:
    """Replicates that the pilot attempted, by series, each an array (sizes,)."""
    by_size: dict[str, dict[int, tuple[int, int]]] = {}
    for row in read_rows(folder / closing_path("fits"), FIT_COLUMNS):
        counts = row["replicates_used"], row["replicates_attempted"]
        by_size.setdefault(row["series"], {})[row["size"]] = counts
    for series in plan.series:
        if series.name not in found or set(by_size.get(series.name, ())) != set(plan.sweep.sizes):
            said = f"results of other series or sizes: not those of {series.name} at {list(plan.sweep.sizes)}"
            raise UsageError(str(folder), said, "results of the sweep as its file stands", run_first)
        for size in plan.sweep.sizes:
            used, asked = by_size[series.name][size]
            if used < 2:
                found_here = f"{used} usable of {asked} replicates at size {size} of {series.name}"
                advice = "16 make a pilot; give it more and run it again"
                raise UsageError(str(folder), found_here, "at least two, of which a scatter is known", advice)
    return {
        name: np.array([counts[size][1] for size in plan.sweep.sizes])
        for name, counts in by_size.items()
        if set(counts) == set(plan.sweep.sizes)
    }


def costs_of_sizes(plan: Plan, folder: Path) -> list[SizeCost]:
    """Cost of a replicate of each size, from the tables of the pilot or, without them, from forecasts."""
    groups: dict[int, dict[str, list[Job]]] = {size: {} for size in plan.sweep.sizes}
    for size, group, job in _costly_jobs(plan):
        groups[size].setdefault(group, []).append(job)
    return [_cost_of_size(groups[size], folder) for size in plan.sweep.sizes]


def _costly_jobs(plan: Plan) -> Iterator[tuple[int, str, Job]]:
    """Jobs that a replicate takes part in, with its size and what they compute of it."""
    for stage in COSTLY_STAGES:
        for job in plan.jobs[stage].values():
            request = job.request
            assert isinstance(request, SprinkleRequest | DiagonaliseRequest)
            operator = f"{request.matrix} {request.part}" if isinstance(request, DiagonaliseRequest) else ""
            yield request.point.size, f"{request.point.name} {operator}", job


def _cost_of_size(groups: Mapping[str, list[Job]], folder: Path) -> SizeCost:
    seconds, done, measured = 0.0, [], 0
    for jobs in groups.values():
        rows = [
            row
            for job in jobs
            if (folder / job.outputs[0]).exists()
            for row in read_rows(folder / job.outputs[0], ["replicate", "seconds"])
        ]
        done.append(len({row["replicate"] for row in rows}))
        if rows:
            # where products share threads, each of them may have been busy all along
            seconds += jobs[0].threads * float(np.mean([row["seconds"] for row in rows]))
            measured += 1
        else:
            seconds += _forecast(jobs[0])
    source = {0: "forecast", len(groups): "measured"}.get(measured, "partly forecast")
    shared = any(jobs[0].threads > 1 for jobs in groups.values())
    return SizeCost(seconds, f"{source}, at most" if shared and measured else source, min(done))


def _forecast(job: Job) -> float:
    request = job.request
    assert isinstance(request, SprinkleRequest | DiagonaliseRequest)
    return (job.seconds - cost.START_SECONDS) / (request.stop - request.first)
