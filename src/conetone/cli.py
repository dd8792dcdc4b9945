"""The command line: one subcommand per stage and per errand; reads, calls one function, writes.

Heavy imports stand inside the commands, so that a job starts only what it needs.
"""

import sys
import warnings
from contextlib import AbstractContextManager
from pathlib import Path
from typing import Annotated

import typer

from conetone import __version__
from conetone.errors import ConetoneError

app = typer.Typer(
    no_args_is_help=True,
    add_completion=False,
    rich_markup_mode=None,
    pretty_exceptions_enable=False,
    context_settings={"help_option_names": ["-h", "--help"]},
    help="Measure the spectral exponents of causal sets: sprinkle, diagonalise, fit, extrapolate.",
)

SweepFile = Annotated[
    Path, typer.Argument(metavar="SWEEP.yaml", help="The sweep file; see config/README.md.")
]
Results = Annotated[Path, typer.Option(metavar="DIR", help="Folder that holds one folder per sweep.")]
RequestText = Annotated[
    str, typer.Option("--request", metavar="JSON", help="What to compute, as the workflow writes it.")
]
Threads = Annotated[int, typer.Option(min=1, metavar="N", help="Threads.")]
Output = Annotated[Path, typer.Option(metavar="FILE", help="Table to write.")]


def main() -> None:
    """Run the command line; errors that we explain become one message and an exit code."""
    warnings.formatwarning = _one_line
    try:
        app()
    except ConetoneError as error:
        print(f"conetone: {error}", file=sys.stderr)
        sys.exit(error.exit_code)


def _one_line(
    message: Warning | str, category: type[Warning], filename: str, lineno: int, line: str | None = None
) -> str:
    """A UserWarning is for the person, who wants no line of source; others are for us."""
    if category is UserWarning:
        return f"conetone: {message}\n"
    return f"{filename}:{lineno}: {category.__name__}: {message}\n"


def _version(wanted: bool) -> None:
    if wanted:
        print(f"conetone {__version__}")
        raise typer.Exit


@app.callback()
def _global(
    version: Annotated[
        bool, typer.Option("--version", callback=_version, is_eager=True, help="Print the version and exit.")
    ] = False,
) -> None:
    pass


@app.command(context_settings={"allow_extra_args": True, "allow_interspersed_args": True})
def run(
    context: typer.Context,
    sweep: SweepFile,
    cores: Annotated[
        int | None, typer.Option(min=1, metavar="N", help="Jobs at once [default: all cores].")
    ] = None,
    results: Results = Path("results"),
    quiet: Annotated[bool, typer.Option("--quiet", "-q", help="Print nothing but errors.")] = False,
    json: Annotated[
        bool, typer.Option("--json", help="Print the outcome as JSON on standard output.")
    ] = False,
) -> None:
    """Compute a sweep, or what is missing of it, and show its exponents.

    Stopped or killed runs go on where they ended when the same command is given again.
    What follows -- goes to Snakemake.

    Example: conetone run config/first-look.yaml --cores 2
    """
    if quiet:
        warnings.simplefilter("ignore", UserWarning)
    from conetone.run.running import run_sweep
    from conetone.stages.kernels import compile_all

    sys.exit(
        run_sweep(
            sweep,
            results,
            cores,
            compile_all,
            snakemake_options=context.args,
            quiet=quiet,
            as_json=json,
        )
    )


@app.command()
def expand(
    sweep: SweepFile,
    results: Results = Path("results"),
    json: Annotated[bool, typer.Option("--json", help="Print JSON.")] = False,
) -> None:
    """Show what a sweep expands into: points, series, jobs, before anything runs.

    Example: conetone expand config/first-look.yaml
    """
    from conetone.run.expansion import print_expansion

    print_expansion(sweep, results, as_json=json)


@app.command()
def allocate(
    sweep: SweepFile,
    target: Annotated[
        float | None, typer.Option(metavar="ERROR", help="Total error that every exponent shall reach.")
    ] = None,
    budget: Annotated[
        str | None,
        typer.Option(metavar="TIME", help="Core time, that of the pilot included: 90m, 40h, 2d."),
    ] = None,
    floor: Annotated[
        int | None, typer.Option(min=2, metavar="N", help="Fewest replicates of a size [default: 8].")
    ] = None,
    results: Results = Path("results"),
    json: Annotated[bool, typer.Option("--json", help="Print JSON.")] = False,
) -> None:
    """Say how many replicates of each size reach an error at least cost, from a pilot's results.

    Give a target or a budget.

    Example: conetone allocate config/first-look.yaml --target 0.005
    """
    from conetone.run.allocation import print_allocation

    sys.exit(print_allocation(sweep, results, target, budget, floor, as_json=json))


@app.command()
def calibrate(
    sweep: SweepFile,
    injections: Annotated[
        int, typer.Option(min=1, max=100_000, metavar="N", help="Injections of each truth into each series.")
    ] = 400,
    cores: Annotated[
        int | None, typer.Option(min=1, metavar="N", help="Jobs at once [default: all cores].")
    ] = None,
    seed: Annotated[
        int | None, typer.Option(min=0, metavar="N", help="Seed of the injections [default: the sweep's].")
    ] = None,
    results: Results = Path("results"),
    quiet: Annotated[bool, typer.Option("--quiet", "-q", help="Print nothing but errors.")] = False,
    json: Annotated[bool, typer.Option("--json", help="Print JSON on standard output.")] = False,
) -> None:
    """Measure how often the errors of a finished sweep hold, on synthetic spectra of known exponent.

    They have the sweep's sizes, replicates and measured noise, and pass through the same fits. More
    injections than before add to those that are there. Exit code 1: errors are smaller than promised.

    Example: conetone calibrate config/first-look.yaml --injections 100 --cores 2
    """
    from conetone.run.calibrating import calibrate_sweep

    sys.exit(calibrate_sweep(sweep, results, cores, injections, seed, quiet=quiet, as_json=json))


@app.command()
def sprinkle(request: RequestText, output: Output, threads: Threads = 1) -> None:
    """Draw the orders of one block (a job of the workflow)."""
    from conetone.stages.sprinkle import sprinkle_block
    from conetone.sweep.requests import SprinkleRequest

    with _threads(threads):
        sprinkle_block(SprinkleRequest.parse(request), output, own_process=True)


@app.command()
def diagonalise(
    request: RequestText,
    orders: Annotated[Path, typer.Option(metavar="FILE", help="Orders of the block.")],
    output: Output,
    threads: Threads = 1,
) -> None:
    """Compute the spectra of one operator of one block (a job of the workflow)."""
    from conetone.stages.diagonalise import diagonalise_block
    from conetone.sweep.requests import DiagonaliseRequest

    # the cores granted are for products, whose bits do not depend on them; those of BLAS do
    with _threads(1):
        asked = DiagonaliseRequest.parse(request)
        diagonalise_block(asked, orders, output, threads=threads, own_process=True)


@app.command()
def fit(request: RequestText, threads: Threads = 1) -> None:
    """Fit one series at all its sizes (a job of the workflow)."""
    from conetone.stages.fit import fit_series
    from conetone.sweep.requests import FitRequest

    with _threads(threads):
        fit_series(FitRequest.parse(request))


@app.command()
def aggregate(request: RequestText, threads: Threads = 1) -> None:
    """Extrapolate every series and collect the tables (a job of the workflow)."""
    from conetone.stages.aggregate import aggregate_sweep
    from conetone.sweep.requests import AggregateRequest

    with _threads(threads):
        aggregate_sweep(AggregateRequest.parse(request))


@app.command()
def figure(request: RequestText, threads: Threads = 1) -> None:
    """Draw the figures of a sweep from its tables (a job of the workflow)."""
    from conetone.stages.figure import draw_figures
    from conetone.sweep.requests import FigureRequest

    with _threads(threads):
        draw_figures(FigureRequest.parse(request))


@app.command()
def inject(request: RequestText, output: Output, threads: Threads = 1) -> None:
    """Inject spectra of known exponent into one series (a job of `calibrate`)."""
    from conetone.stages.inject import inject_block
    from conetone.sweep.requests import InjectRequest

    with _threads(threads):
        inject_block(InjectRequest.parse(request), output, own_process=True)


@app.command()
def coverage(request: RequestText, threads: Threads = 1) -> None:
    """Collect the injections and draw how often errors held (a job of `calibrate`)."""
    from conetone.stages.coverage import collect_coverage
    from conetone.sweep.requests import CoverageRequest

    with _threads(threads):
        collect_coverage(CoverageRequest.parse(request))


def _threads(count: int) -> AbstractContextManager[object]:
    """Limit the BLAS libraries that are loaded by now: import a stage before entering."""
    from threadpoolctl import threadpool_limits

    limits: AbstractContextManager[object] = threadpool_limits(limits=count)
    return limits
