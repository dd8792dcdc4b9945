"""From a YAML file to a fully resolved Sweep, or to one clear error before anything starts."""

import difflib
import math
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from itertools import product
from pathlib import Path
from typing import Any, Literal, TypeVar

from pydantic import BaseModel, ValidationError
from pydantic_core import ErrorDetails

from conetone.errors import SweepError
from conetone.fit.windows import Growth, WindowRule
from conetone.sprinkle.catalogue import ENSEMBLES
from conetone.sweep.cost import diagonalise_mib, largest_size, memory_of_this_machine_mib
from conetone.sweep.fields import ENSEMBLE_FIELDS, Fields, SweepFields, WindowFields, names
from conetone.sweep.points import Count, EnsembleChoice, OperatorChoice
from conetone.sweep.reading import read_yaml
from conetone.sweep.settings import ExtrapolationSettings, WindowSettings


T = TypeVar("T")


@dataclass(frozen=True)
class Sweep:
    """A sweep with every default filled in and every list expanded; `replicates` has one entry a size."""

    name: str
    root_seed: int
    choices: tuple[EnsembleChoice, ...]
    sizes: tuple[int, ...]
    replicates: tuple[int, ...]
    operators: tuple[OperatorChoice, ...]
    extent: Literal["full"]
    windows: WindowSettings
    extrapolation: ExtrapolationSettings


def load_sweep(path: Path) -> Sweep:
    """Read, check and resolve a sweep file; raises SweepError, the place prefixed with the file's name."""
    try:
        return resolve_sweep(read_yaml(path))
    except SweepError as error:
        raise SweepError(f"{path}: {error.place}", error.found, error.allowed, error.advice) from None


def resolve_sweep(values: Any) -> Sweep:
    """Check and resolve the values of a sweep file; raises SweepError with the first fault."""
    if not isinstance(values, dict):
        raise SweepError(
            "the file", _describe(values), f"a mapping with the fields {names(SweepFields.model_fields)}"
        )
    try:
        fields = SweepFields.model_validate(values)
    except ValidationError as error:
        raise _first_fault(values, error) from None
    sizes = _rising(fields.sizes)
    operators = _operators(fields)
    _check_memory(sizes, operators)
    return Sweep(
        name=fields.sweep,
        root_seed=fields.root_seed,
        choices=_choices(fields),
        sizes=sizes,
        replicates=_replicates(fields, values["replicates"]),
        operators=operators,
        extent=fields.spectrum.extent,
        windows=_windows(fields.windows, sizes[-1]),
        extrapolation=ExtrapolationSettings(
            _distinct("extrapolation.omegas", fields.extrapolation.omegas),
            fields.extrapolation.most_sizes_cut,
        ),
    )


def _rising(sizes: Sequence[int]) -> tuple[int, ...]:
    for i, (smaller, larger) in enumerate(zip(sizes[:-1], sizes[1:], strict=True), 1):
        if larger <= smaller:
            found = f"{larger} again" if larger == smaller else f"{larger} after {smaller}"
            raise SweepError(f"sizes[{i}]", found, "sizes that rise, each once", "sort them and drop repeats")
    return tuple(sizes)


def _replicates(fields: SweepFields, given: Any) -> tuple[int, ...]:
    if not isinstance(given, list):
        return tuple(fields.replicates) * len(fields.sizes)
    if len(given) != len(fields.sizes):
        raise SweepError(
            "replicates",
            f"a list of {len(given)} for {len(fields.sizes)} sizes",
            "one number, or one for each size",
        )
    return tuple(given)


def _choices(fields: SweepFields) -> tuple[EnsembleChoice, ...]:
    count: Count = fields.count
    seen: dict[EnsembleChoice, str] = {}
    for i, entry in enumerate(fields.ensembles):
        parameters = [parameter.name for parameter in ENSEMBLES[entry.ensemble].parameters]
        for values in product(*(getattr(entry, name) for name in parameters)):
            choice = EnsembleChoice(
                entry.ensemble, tuple(sorted(zip(parameters, values, strict=True))), count
            )
            if choice in seen:
                raise SweepError(
                    f"ensembles[{i}]",
                    f"{choice.label}, which stands in {seen[choice]} already",
                    "each ensemble once",
                )
            seen[choice] = f"ensembles[{i}]"
    return tuple(seen)


def _operators(fields: SweepFields) -> tuple[OperatorChoice, ...]:
    seen: dict[OperatorChoice, str] = {}
    for i, entry in enumerate(fields.operators):
        for part in entry.part:
            operator = OperatorChoice(entry.matrix, part)
            if operator in seen:
                raise SweepError(
                    f"operators[{i}]",
                    f"{operator.name}, which stands in {seen[operator]} already",
                    "each part once",
                )
            seen[operator] = f"operators[{i}]"
    return tuple(seen)


def _windows(fields: WindowFields, largest: int) -> WindowSettings:
    firsts, lasts = _growths("windows.from", fields.from_), _growths("windows.to", fields.to)
    for (i, first), (j, last) in product(enumerate(firsts), enumerate(lasts)):
        if first.at(largest) >= last.at(largest):
            raise SweepError(
                f"windows.to[{j}]",
                f"{last}, which at size {largest} is rank {last.at(largest):.3g}",
                f"more than windows.from[{i}], {first}, rank {first.at(largest):.3g}",
            )
    rules = tuple(WindowRule(first, last) for first, last in product(firsts, lasts))
    return WindowSettings(
        rules, fields.smallest_rank, fields.bins, _distinct("windows.models", fields.models)
    )


def _growths(place: str, texts: Sequence[str]) -> tuple[Growth, ...]:
    growths = []
    for i, text in enumerate(texts):
        try:
            growths.append(Growth.parse(text))
        except ValueError:
            allowed = "`c * n^b` with c > 0 and 0 < b ≤ 1, such as 0.25 * n^0.5"
            raise SweepError(f"{place}[{i}]", repr(text), allowed) from None
    return _distinct(place, growths)


def _distinct(place: str, values: Sequence[T]) -> tuple[T, ...]:
    for i, value in enumerate(values):
        if value in values[:i]:
            raise SweepError(f"{place}[{i}]", f"{_describe(value)} again", "each value once")
    return tuple(values)


def _check_memory(sizes: Sequence[int], operators: Iterable[OperatorChoice]) -> None:
    available = memory_of_this_machine_mib()
    for i, size in enumerate(sizes):
        for operator in operators:
            needed = diagonalise_mib(size, operator)
            if needed > available:
                raise SweepError(
                    f"sizes[{i}]",
                    f"{size}, whose full {operator.name} spectrum needs about {needed / 1024:,.0f} GiB of memory",
                    f"up to {largest_size(operator, available):,} on this machine with {available / 1024:,.0f} GiB",
                )


# --- pydantic's errors in our words ---------------------------------------------------------------------


def _first_fault(values: Any, error: ValidationError) -> SweepError:
    faults = sorted(error.errors(include_url=False), key=lambda fault: _position(values, fault["loc"]))
    others = (
        f"{len(faults) - 1} more fault{'s' if len(faults) > 2 else ''} in the file" if len(faults) > 1 else ""
    )
    fault = _translated(values, faults[0])
    advice = "; ".join(part for part in (fault.advice, others) if part)
    return SweepError(fault.place, fault.found, fault.allowed, advice)


def _position(values: Any, loc: Sequence[int | str]) -> tuple[int, ...]:
    """Where a fault stands in the file, for sorting; a missing field comes last in its mapping."""
    position = []
    for step in loc:
        if isinstance(values, dict):
            keys = list(values)
            position.append(keys.index(step) if step in keys else len(keys))
            values = values.get(step, values)
        elif isinstance(values, list) and isinstance(step, int) and step < len(values):
            position.append(step)
            values = values[step]
    return tuple(position)


def _translated(values: Any, fault: ErrorDetails) -> SweepError:
    place, fields, allowed = _locate(values, fault)
    kind = fault["type"]
    if kind == "extra_forbidden":
        options = [field.alias or name for name, field in fields.model_fields.items()]
        close = difflib.get_close_matches(str(fault["loc"][-1]), options, n=1)
        advice = f"did you mean {close[0]}?" if close else "remove it"
        return SweepError(place, "an unknown field", f"the fields {names(options)}", advice)
    if kind == "missing":
        return SweepError(place, "nothing", allowed, "add this field")
    if kind in ("union_tag_invalid", "union_tag_not_found"):
        entry = fault["input"]
        found = _describe(entry["ensemble"]) if isinstance(entry, dict) and "ensemble" in entry else "nothing"
        close = difflib.get_close_matches(found.strip("'"), ENSEMBLES, n=1)
        advice = f"did you mean {close[0]}?" if close else ""
        return SweepError(f"{place}.ensemble", found, names(ENSEMBLES), advice)
    if kind in ("model_type", "model_attributes_type", "dict_type"):
        return SweepError(place, _describe(fault["input"]), "a mapping of fields")
    return SweepError(place, _describe(fault["input"]), allowed)


def _locate(values: Any, fault: ErrorDetails) -> tuple[str, type[Fields], str]:
    """The place in words, the mapping it stands in, and what that field allows."""
    place, fields, allowed = "", SweepFields, ""
    for step in fault["loc"]:
        if isinstance(step, int):
            if isinstance(values, list):
                place += f"[{step}]"
                values = values[step] if step < len(values) else None
            continue
        if step in ENSEMBLE_FIELDS and not (isinstance(values, dict) and step in values):
            fields = ENSEMBLE_FIELDS[step]
            continue
        place += f".{step}" if place else str(step)
        values = values.get(step) if isinstance(values, dict) else None
        known = {field.alias or name: field for name, field in fields.model_fields.items()}
        if step in known:
            extra = known[step].json_schema_extra
            allowed = str(extra["x-allowed"]) if isinstance(extra, dict) else ""
            inner = _inner_model(step)
            fields = inner or fields
    return place or "the file", fields, allowed


def _inner_model(field: str) -> type[Fields] | None:
    inner: dict[str, type[Fields]] = {
        "operators": _item_model("operators"),
        "spectrum": _item_model("spectrum"),
        "windows": _item_model("windows"),
        "extrapolation": _item_model("extrapolation"),
    }
    return inner.get(field)


def _item_model(field: str) -> type[Fields]:
    annotation = SweepFields.model_fields[field].annotation
    candidates = [annotation, *getattr(annotation, "__args__", ())]
    return next(c for c in candidates if isinstance(c, type) and issubclass(c, BaseModel))  # type: ignore[return-value]


def _describe(value: Any) -> str:
    """A value as a person wrote it, shortened."""
    if value is None:
        return "nothing (null)"
    if isinstance(value, bool):
        return str(value).lower()
    if isinstance(value, str):
        return repr(value if len(value) <= 60 else value[:57] + "…") if value else "an empty text"
    if isinstance(value, list):
        return f"a list of {len(value)}" if value else "an empty list"
    if isinstance(value, dict):
        return "a mapping" if value else "an empty mapping"
    if isinstance(value, float) and not math.isfinite(value):
        return {math.inf: "infinity", -math.inf: "−infinity"}.get(value, "NaN")
    return str(value) if isinstance(value, int | float | Growth) else f"a {type(value).__name__}"
