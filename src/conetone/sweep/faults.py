"""Faults of a sweep file in our words: where in the file, what stands there, what is allowed, what to do."""

import difflib
import math
import re
import unicodedata
from collections.abc import Iterable, Sequence
from typing import Any

from pydantic import ValidationError
from pydantic_core import ErrorDetails

from conetone.errors import SweepError
from conetone.fit.windows import Growth
from conetone.sprinkle.catalogue import ENSEMBLES
from conetone.sweep.fields import (
    ENSEMBLE_FIELDS,
    INNER_FIELDS,
    LONGEST_NAME,
    Fields,
    SweepFields,
    allowed_in_words,
    by_file_name,
    names,
)
from conetone.sweep.reading import THE_FILE, shortened

# Keys of mappings and indices of lists, from the top of the file.
Steps = Sequence[int | str]

PLAIN_WORD = re.compile(r"[\w-]{1,60}")
NUMBER = re.compile(r"[-+]?([0-9]+\.?[0-9]*|\.[0-9]+)(e[-+]?[0-9]+)?", re.IGNORECASE)
MOST_DIGITS = 25
ENTRY_ALLOWED = "a mapping of the field ensemble and the parameters of that ensemble"


def place_of(values: Any, steps: Steps) -> str:
    """A place in words, such as `ensembles[1].dimension[0]`; a value given without its list has no index."""
    place = ""
    for step in steps:
        if isinstance(step, str):
            word = step if PLAIN_WORD.fullmatch(step) else repr(shortened(step))
            place += f".{word}" if place else word
            values = values.get(step) if isinstance(values, dict) else None
        elif isinstance(values, list):
            place += f"[{step}]"
            values = values[step]
    return place or THE_FILE


def fields_in_words(known: Iterable[str]) -> str:
    """`the fields a, b and c`."""
    listed = names(known, "and")
    return f"the fields {listed}" if " " in listed else f"the field {listed}"


def describe(value: Any) -> str:
    """A value about as a person wrote it, on one line, shortened."""
    if value is None:
        return "nothing (null)"
    if isinstance(value, bool):
        return str(value).lower()
    if isinstance(value, str):
        return repr(shortened(value)) if value else "an empty text"
    if isinstance(value, list):
        return f"a list of {len(value)}" if value else "an empty list"
    if isinstance(value, dict):
        return "a mapping" if value else "an empty mapping"
    if isinstance(value, float) and not math.isfinite(value):
        return {math.inf: "infinity", -math.inf: "−infinity"}.get(value, "NaN")
    if isinstance(value, int) and abs(value) >= 10**MOST_DIGITS:
        return f"a number of more than {MOST_DIGITS} digits"
    return str(value) if isinstance(value, int | float | Growth) else f"a {type(value).__name__}"


def check_keys(values: Any) -> None:
    """Raise SweepError for a key anywhere that is no text: pydantic has no place for those."""
    rest: list[tuple[tuple[int | str, ...], Any]] = [((), values)]
    while rest:
        steps, value = rest.pop()
        if isinstance(value, dict):
            for key in value:
                if not _is_text(key):
                    found = f"{describe(key)} as the name of a field"
                    raise SweepError(place_of(values, steps), found, "names that are words")
            rest += [((*steps, key), inner) for key, inner in value.items()]
        elif isinstance(value, list):
            rest += [((*steps, i), inner) for i, inner in enumerate(value)]


def _is_text(key: Any) -> bool:
    # half a surrogate pair is a str, but no Unicode text
    return isinstance(key, str) and not any("\ud800" <= character <= "\udfff" for character in key)


def first_fault(values: Any, error: ValidationError) -> SweepError:
    """The fault that stands first in the file, as one error that counts the others."""
    ranks: dict[int, dict[str, int]] = {}

    def position(fault: ErrorDetails) -> list[int]:
        # a missing field comes last in its mapping
        inner, found = values, []
        for step in _steps(fault):
            if isinstance(inner, dict):
                if id(inner) not in ranks:
                    ranks[id(inner)] = {key: rank for rank, key in enumerate(inner)}
                found.append(ranks[id(inner)].get(str(step), len(inner)))
                inner = inner.get(step)
            elif isinstance(inner, list):
                found.append(int(step))
                inner = inner[int(step)]
        return found

    faults = sorted(error.errors(include_url=False), key=position)
    fault = _translated(values, faults[0])
    more = len(faults) - 1
    others = f"{more} more fault{'s' if more > 1 else ''} in the file" if more else ""
    advice = "; ".join(part for part in (fault.advice, others) if part)
    return SweepError(fault.place, fault.found, fault.allowed, advice)


def closest(word: Any, options: Iterable[str]) -> str:
    """`did you mean …?` if one of the options resembles the word, else nothing."""
    close = difflib.get_close_matches(word, options, n=1) if isinstance(word, str) else []
    return f"did you mean {close[0]}?" if close else ""


def _steps(fault: ErrorDetails) -> Steps:
    """Where a fault stands in the file; pydantic adds the name of the ensemble after `ensembles`, i."""
    loc = fault["loc"]
    return (*loc[:2], *loc[3:]) if loc[0] == "ensembles" else loc


def _fields_around(fault: ErrorDetails) -> type[Fields]:
    """The mapping that the faulty field stands in."""
    loc = fault["loc"]
    if loc[0] == "ensembles" and len(loc) > 2:
        return ENSEMBLE_FIELDS[str(loc[2])]
    inside = any(isinstance(step, str) for step in loc[1:])
    return INNER_FIELDS[str(loc[0])] if inside else SweepFields


def _translated(values: Any, fault: ErrorDetails) -> SweepError:
    kind, given = fault["type"], fault["input"]
    steps = _steps(fault)
    place = place_of(values, steps)
    field_name = [step for step in steps if isinstance(step, str)][-1]
    known = by_file_name(_fields_around(fault))
    if kind == "extra_forbidden":
        advice = closest(field_name, known) or "remove it"
        return SweepError(place, "an unknown field", fields_in_words(known), advice)
    if kind in ("union_tag_invalid", "union_tag_not_found"):
        place, found = f"{place}.ensemble", given.get("ensemble")
        if found is None:
            return SweepError(place, "nothing", names(ENSEMBLES), "name the ensemble")
        return SweepError(place, describe(found), names(ENSEMBLES), closest(found, ENSEMBLES))
    field = known[field_name]
    allowed = allowed_in_words(field)
    if kind == "missing":
        return SweepError(place, "nothing", allowed, "add this field")
    if given is None and not field.is_required():
        return SweepError(place, describe(given), allowed, "leave the field out for its default")
    if kind in ("model_type", "model_attributes_type"):
        inner = INNER_FIELDS.get(field_name)
        allowed = f"a mapping of {fields_in_words(by_file_name(inner))}" if inner else ENTRY_ALLOWED
    return SweepError(place, describe(given), allowed, _advice(fault))


def _advice(fault: ErrorDetails) -> str:
    """What was probably meant, ready to be copied; empty where nothing suggests itself."""
    kind, given = fault["type"], fault["input"]
    if kind == "literal_error":
        return closest(given, re.findall(r"'([^']+)'", fault["ctx"]["expected"]))
    if kind in ("int_type", "float_type"):
        return _number_meant(given, whole=kind == "int_type")
    if kind == "string_type" and fault["loc"][0] == "sweep" and isinstance(given, int | float):
        return "quote it to make it a text"
    if kind == "string_pattern_mismatch":
        meant = _growth_meant(given) if fault["loc"][0] == "windows" else _name_meant(given)
        return f"write {meant}" if meant else ""
    return ""


def _number_meant(given: Any, whole: bool) -> str:
    """For a number that YAML reads as a text, such as 1e-3, and for a whole number with a point."""
    text = repr(given) if type(given) is float else given
    if not (isinstance(text, str) and len(text) <= MOST_DIGITS and NUMBER.fullmatch(text)):
        return ""
    if whole:
        number = float(text)
        return f"write {int(number)}" if number.is_integer() and abs(number) < 2**53 else ""
    mantissa, e, exponent = text.lower().partition("e")
    # YAML 1.1 wants a point in the mantissa and a sign in the exponent
    mantissa += "" if "." in mantissa else ".0"
    sign = "" if not e or exponent[0] in "+-" else "+"
    return f"write {mantissa}{e}{sign}{exponent}"


def _growth_meant(given: str) -> str:
    """`0.5*n**0.5` and the like in the one spelling that is read."""
    spaced = re.sub(r"\s*\*\s*", " * ", re.sub(r"\s*(\^|\*\*)\s*", "^", given.strip()))
    try:
        Growth.parse(spaced)
    except ValueError:
        return ""
    return spaced


def _name_meant(given: str) -> str:
    without_accents = unicodedata.normalize("NFKD", given).encode("ascii", "ignore").decode()
    name = re.sub(r"[^a-z0-9]+", "-", without_accents.lower()).strip("-")
    return name if len(name) <= LONGEST_NAME else ""
