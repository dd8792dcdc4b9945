"""Whether every job of a sweep fits into the memory of this machine and into its tables."""

from collections.abc import Callable, Iterator, Sequence
from typing import Any

from conetone.errors import SweepError
from conetone.sprinkle.catalogue import ENSEMBLES
from conetone.sweep.cost import (
    diagonalise_mib,
    largest_size,
    memory_of_this_machine_mib,
    sprinkle_mib,
)
from conetone.sweep.faults import place_of
from conetone.sweep.points import EnsembleChoice, OperatorChoice, Point
from conetone.sweep.settings import SpectrumSettings

# A packed relation of 625 MB, which takes six times as much to write; a cell of Parquet ends at 2 GiB.
LARGEST_WITHOUT_POSITIONS = 100_000


def check_memory(
    values: Any,
    sizes: Sequence[int],
    spectra: Sequence[SpectrumSettings],
    choices: Sequence[EnsembleChoice],
    operators: Sequence[OperatorChoice],
) -> None:
    """Raise SweepError for the first size that is too large; `values` are those of the sweep file."""
    available = memory_of_this_machine_mib()
    # jobs of ensembles that need the same memory at every size are looked at once
    kinds = {(_without_positions(choice), choice.parameters): choice for choice in choices}
    for i, (size, spectrum) in enumerate(zip(sizes, spectra, strict=True)):
        place = place_of(values, ("sizes", i))
        for without, choice in ((key[0], choice) for key, choice in kinds.items()):
            if without and size > LARGEST_WITHOUT_POSITIONS:
                found = f"{size}, at which an order of {choice.label} takes too much room in a table"
                raise SweepError(place, found, f"up to {LARGEST_WITHOUT_POSITIONS} for this ensemble")
        for what, mib_of, advice in _jobs(list(kinds.values()), operators, spectrum):
            needed = mib_of(size)
            if needed <= available:
                continue
            largest = largest_size(mib_of, available, size)
            raise SweepError(
                place,
                f"{size}, whose {what} needs {needed / 1024:,.1f} GiB of memory",
                f"up to {largest} on this machine, which has {available / 1024:,.1f} GiB",
                advice,
            )


def _without_positions(choice: EnsembleChoice) -> bool:
    return ENSEMBLES[choice.ensemble].from_positions is None


def _jobs(
    choices: Sequence[EnsembleChoice], operators: Sequence[OperatorChoice], spectrum: SpectrumSettings
) -> Iterator[tuple[str, Callable[[int], float], str]]:
    """Every kind of job at a size: in words, its memory by size, and what to do if that is too much."""
    advice = "spectrum.extent: leading needs less" if spectrum.extent == "full" else ""
    for choice in choices:
        for operator in operators:
            yield _in_words(spectrum), _diagonalise(choice, operator, spectrum), advice
        yield "order", _sprinkle(choice), ""


def _in_words(spectrum: SpectrumSettings) -> str:
    if spectrum.count is None:
        return "full spectrum"
    return f"leading spectrum of {spectrum.count} eigenvalues of each sign"


def _diagonalise(
    choice: EnsembleChoice, operator: OperatorChoice, spectrum: SpectrumSettings
) -> Callable[[int], float]:
    return lambda size: diagonalise_mib(Point(choice, size), operator, spectrum)


def _sprinkle(choice: EnsembleChoice) -> Callable[[int], float]:
    return lambda size: sprinkle_mib(Point(choice, size))
