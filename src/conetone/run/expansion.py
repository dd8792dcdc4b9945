"""`conetone expand`: what a sweep expands into, before anything runs."""

import json
from pathlib import Path

from rich import box
from rich.table import Table

from conetone.run.outcome import plain_console
from conetone.run.progress import duration
from conetone.sweep.blocks import blocks_of
from conetone.sweep.definition import load_sweep
from conetone.sweep.plan import STAGES, Plan


def print_expansion(sweep_file: Path, results: Path, *, as_json: bool) -> None:
    """Print points, series and jobs with their forecasts; raises SweepError for a faulty file."""
    plan = Plan(load_sweep(sweep_file))
    folder = results.absolute() / plan.sweep.name
    if as_json:
        _print_json(plan, folder)
    else:
        _print_text(plan, folder)


def _print_json(plan: Plan, folder: Path) -> None:
    value = {
        "sweep": plan.sweep.name,
        "folder": str(folder),
        "points": [
            {
                "point": point.name,
                **point.as_json(),
                "replicates": replicates,
                "blocks": len(list(blocks_of(point, replicates))),
            }
            for point, replicates in plan.points
        ],
        "spectra": [
            {"size": size, **spectrum.as_json(), "why": spectrum.why}
            for size, spectrum in plan.spectra.items()
        ],
        "series": [{"series": series.name, **series.as_json()} for series in plan.series],
        "jobs": {
            stage: {
                "count": len(plan.jobs[stage]),
                "missing": len(plan.missing(folder, stage)),
                "core_seconds": round(sum(job.seconds for job in plan.jobs[stage].values()), 1),
                "peak_mib": round(max(job.mib for job in plan.jobs[stage].values())),
            }
            for stage in STAGES
        },
    }
    print(json.dumps(value, indent=2))


def _print_text(plan: Plan, folder: Path) -> None:
    console = plain_console()
    sizes = ", ".join(str(size) for size in plan.sweep.sizes)
    console.print(
        f"Sweep {plan.sweep.name}: {len(plan.points)} points, {len(plan.series)} series, sizes {sizes}."
    )
    points = Table(box=box.SIMPLE_HEAD, pad_edge=False, title="Points", title_justify="left")
    for header in ("ensemble", "size", "replicates", "blocks"):
        points.add_column(header, justify="left" if header == "ensemble" else "right")
    for point, replicates in plan.points:
        blocks = len(list(blocks_of(point, replicates)))
        points.add_row(point.choice.label, str(point.size), str(replicates), str(blocks))
    console.print(points)
    spectra = Table(box=box.SIMPLE_HEAD, pad_edge=False, title="Spectra", title_justify="left")
    for header in ("size", "extent", "of each sign", "why"):
        spectra.add_column(header, justify="right" if header in ("size", "of each sign") else "left")
    for size, spectrum in plan.spectra.items():
        count = "all" if spectrum.count is None else str(spectrum.count)
        spectra.add_row(str(size), spectrum.extent, count, spectrum.why)
    console.print(spectra)
    series = Table(box=box.SIMPLE_HEAD, pad_edge=False, title="Series", title_justify="left")
    for header in ("ensemble", "matrix", "part"):
        series.add_column(header)
    for each in plan.series:
        series.add_row(each.choice.label, each.operator.matrix, each.operator.part)
    console.print(series)
    jobs = Table(box=box.SIMPLE_HEAD, pad_edge=False, title="Jobs", title_justify="left")
    for header in ("stage", "jobs", "not there yet", "core time", "memory of one"):
        jobs.add_column(header, justify="left" if header == "stage" else "right")
    for stage in STAGES:
        of_stage = plan.jobs[stage].values()
        jobs.add_row(
            stage,
            str(len(of_stage)),
            str(len(plan.missing(folder, stage))),
            duration(sum(job.seconds for job in of_stage)),
            f"{max(job.mib for job in of_stage):.0f} MiB",
        )
    console.print(jobs)
    console.print(f"Results: {folder}", soft_wrap=True)
