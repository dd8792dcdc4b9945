"""From a YAML file to a fully resolved Sweep, or to one clear error before anything starts."""

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise, product
from pathlib import Path
from typing import Any, TypeVar

from pydantic import ValidationError

from conetone.errors import SweepError
from conetone.fit.size import WindowSettings
from conetone.fit.windows import Growth, WindowRule
from conetone.sprinkle.catalogue import ENSEMBLES
from conetone.sweep.extents import resolve_spectra
from conetone.sweep.faults import Steps, check_keys, describe, fields_in_words, first_fault, place_of
from conetone.sweep.fields import SweepFields, WindowFields, allowed_in_words, by_file_name
from conetone.sweep.memory import check_memory
from conetone.sweep.points import Count, EnsembleChoice, OperatorChoice
from conetone.sweep.reading import THE_FILE, read_yaml, shortened
from conetone.sweep.settings import ExtrapolationSettings, SpectrumSettings

T = TypeVar("T")


@dataclass(frozen=True)
class Sweep:
    """A sweep with every default filled in and every list expanded.

    `replicates` and `spectra` have one entry a size.
    """

    name: str
    root_seed: int
    choices: tuple[EnsembleChoice, ...]
    sizes: tuple[int, ...]
    replicates: tuple[int, ...]
    operators: tuple[OperatorChoice, ...]
    spectra: tuple[SpectrumSettings, ...]
    windows: WindowSettings
    extrapolation: ExtrapolationSettings


def load_sweep(path: Path) -> Sweep:
    """Read, check and resolve a sweep file; raises SweepError, the place prefixed with the file's name."""
    try:
        return resolve_sweep(read_yaml(path))
    except SweepError as error:
        place = str(path) if error.place == THE_FILE else f"{path}: {error.place}"
        raise SweepError(place, error.found, error.allowed, error.advice) from None


def resolve_sweep(values: Any) -> Sweep:
    """Check and resolve the values of a sweep file; raises SweepError with the first fault."""
    if not isinstance(values, dict):
        allowed = f"a mapping of {fields_in_words(by_file_name(SweepFields))}"
        raise SweepError(THE_FILE, describe(values), allowed)
    check_keys(values)
    try:
        fields = SweepFields.model_validate(values)
    except ValidationError as error:
        raise first_fault(values, error) from None
    sizes = _rising(fields.sizes)
    choices, operators = _choices(values, fields), _operators(values, fields)
    windows = _windows(values, fields.windows, sizes[-1])
    spectra = resolve_spectra(fields.spectrum, sizes, windows, {operator.part for operator in operators})
    check_memory(values, sizes, spectra, choices, operators)
    omegas = _distinct(values, ("extrapolation", "omegas"), fields.extrapolation.omegas)
    return Sweep(
        name=fields.sweep,
        root_seed=fields.root_seed,
        choices=choices,
        sizes=sizes,
        replicates=_replicates(fields, values["replicates"]),
        operators=operators,
        spectra=spectra,
        windows=windows,
        extrapolation=ExtrapolationSettings(omegas, fields.extrapolation.most_sizes_cut),
    )


def _rising(sizes: Sequence[int]) -> tuple[int, ...]:
    for i, (smaller, larger) in enumerate(pairwise(sizes), 1):
        if larger <= smaller:
            found = f"{larger} again" if larger == smaller else f"{larger} after {smaller}"
            raise SweepError(f"sizes[{i}]", found, "sizes that rise, each once", "sort them and drop repeats")
    return tuple(sizes)


def _replicates(fields: SweepFields, given: Any) -> tuple[int, ...]:
    if not isinstance(given, list):
        return tuple(fields.replicates) * len(fields.sizes)
    if len(given) != len(fields.sizes):
        sizes = f"{len(fields.sizes)} size{'s' if len(fields.sizes) > 1 else ''}"
        found = f"a list of {len(given)} for {sizes}"
        raise SweepError("replicates", found, "one number, or one for each size")
    return tuple(given)


def _choices(values: Any, fields: SweepFields) -> tuple[EnsembleChoice, ...]:
    count: Count = fields.count
    seen: dict[EnsembleChoice, str] = {}
    for i, entry in enumerate(fields.ensembles):
        parameters = [parameter.name for parameter in ENSEMBLES[entry.ensemble].parameters]
        alternatives = [
            _distinct(values, ("ensembles", i, name), getattr(entry, name)) for name in parameters
        ]
        for chosen in product(*alternatives):
            choice = EnsembleChoice(
                entry.ensemble, tuple(sorted(zip(parameters, chosen, strict=True))), count
            )
            if choice in seen:
                found = f"{choice.label}, which stands in {seen[choice]} already"
                raise SweepError(f"ensembles[{i}]", found, "each ensemble once", "drop one of them")
            seen[choice] = f"ensembles[{i}]"
    return tuple(seen)


def _operators(values: Any, fields: SweepFields) -> tuple[OperatorChoice, ...]:
    seen: dict[OperatorChoice, str] = {}
    for i, entry in enumerate(fields.operators):
        for part in _distinct(values, ("operators", i, "part"), entry.part):
            operator = OperatorChoice(entry.matrix, part)
            if operator in seen:
                found = f"{operator.name}, which stands in {seen[operator]} already"
                raise SweepError(f"operators[{i}]", found, "each part once", "drop one of them")
            seen[operator] = f"operators[{i}]"
    return tuple(seen)


def _windows(values: Any, fields: WindowFields, largest: int) -> WindowSettings:
    firsts = _growths(values, "from", fields.from_)
    lasts = _growths(values, "to", fields.to)
    rules = tuple(WindowRule(first, last) for first, last in product(firsts, lasts))
    _check_windows(values, firsts, lasts, fields.smallest_rank, largest)
    models = _distinct(values, ("windows", "models"), fields.models or ())
    return WindowSettings(rules, fields.smallest_rank, fields.bins, models, fields.estimator, fields.weights)


def _growths(values: Any, end: str, texts: Sequence[str]) -> tuple[Growth, ...]:
    growths = []
    for i, text in enumerate(texts):
        try:
            growths.append(Growth.parse(text))
        except ValueError:
            allowed = allowed_in_words(by_file_name(WindowFields)[end])
            raise SweepError(place_of(values, ("windows", end, i)), describe(text), allowed) from None
    return _distinct(values, ("windows", end), growths)


def _check_windows(
    values: Any, firsts: Sequence[Growth], lasts: Sequence[Growth], smallest_rank: int, largest: int
) -> None:
    """Refuse windows that hold no rank at any size; their ends grow, so that the largest size decides.

    Defaults are left alone: at sizes too small for them the fits fail, each with its reason, and the
    spectra are still of use.
    """
    written = values.get("windows", {})
    for j, last in enumerate(lasts):
        rank, shown = last.at(largest), _at_size(last, largest)
        if "to" in written and rank > largest + 1:
            place = place_of(values, ("windows", "to", j))
            raise SweepError(place, shown, f"ends within the {largest} ranks of a spectrum")
        if "to" in written and rank <= smallest_rank:
            place = place_of(values, ("windows", "to", j))
            raise SweepError(place, shown, f"more than windows.smallest_rank, {smallest_rank}")
        if "smallest_rank" in written and rank <= smallest_rank:
            raise SweepError("windows.smallest_rank", str(smallest_rank), f"less than windows.to, {shown}")
    for (i, first), (j, last) in product(enumerate(firsts), enumerate(lasts)):
        if first.at(largest) < last.at(largest):
            continue
        lower, upper = _at_size(first, largest), _at_size(last, largest)
        lower_place, upper_place = (place_of(values, ("windows", *end)) for end in (("from", i), ("to", j)))
        if "to" in written:
            raise SweepError(upper_place, upper, f"more than {lower_place}, {lower}")
        if "from" in written:
            raise SweepError(
                lower_place, lower, f"less than {upper_place}, {upper}", "windows.to has its default"
            )


def _at_size(growth: Growth, size: int) -> str:
    return f"{shortened(str(growth))}, which at size {size} is rank {growth.at(size):.6g}"


def _distinct(values: Any, steps: Steps, found: Sequence[T]) -> tuple[T, ...]:
    seen = set()
    for i, value in enumerate(found):
        if value in seen:
            raise SweepError(place_of(values, (*steps, i)), f"{describe(value)} again", "each value once")
        seen.add(value)
    return tuple(found)
