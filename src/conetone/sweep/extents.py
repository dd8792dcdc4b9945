"""Which eigenvalues are computed at each size: the fields of `spectrum`, checked against each other and the
windows.
"""

from collections.abc import Sequence
from math import ceil

from conetone.errors import SweepError
from conetone.operators.catalogue import PARTS
from conetone.sweep.cost import full_seconds, leading_seconds
from conetone.sweep.faults import describe
from conetone.sweep.fields import MOST_LEADING, TOLERANCE, SpectrumFields, allowed_in_words, by_file_name
from conetone.sweep.settings import SpectrumSettings, WindowSettings, smallest_for

# Eigenvalues beyond those that the windows take, for the eye: this share, and up to the next multiple of the
# step. Windows that differ by less than a step often ask for the same number, but not across its edge.
MARGIN, STEP = 1 / 16, 8


def resolve_spectra(
    fields: SpectrumFields, sizes: Sequence[int], windows: WindowSettings
) -> tuple[SpectrumSettings, ...]:
    """The settings of each size; raises SweepError for fields that contradict each other or the windows."""
    _check_fields(fields)
    if fields.extent == "full":
        return tuple(SpectrumSettings("full", None, None, fields.solver, "as asked") for _ in sizes)
    if fields.extent == "auto":
        return tuple(_quicker(fields, size, ranks_needed(windows, size)) for size in sizes)
    for size in sizes:
        _check_windows(fields, size, windows)
    return tuple(_leading(fields, size, fields.count, "as asked") for size in sizes)


def ranks_needed(windows: WindowSettings, size: int) -> int:
    """Ranks that the widest window takes at one size; the upper end of a window is exclusive."""
    return max(1, *(ceil(rule.last.at(size) - 1) for rule in windows.rules))


def _check_fields(fields: SpectrumFields) -> None:
    extent, given = fields.extent, fields.model_fields_set
    without = f"no such field with extent: {extent}"
    for name in ("count", "tolerance"):
        if extent == "full" and name in given:
            found = describe(getattr(fields, name))
            raise SweepError(f"spectrum.{name}", found, without, "remove it, or write extent: leading")
    if extent != "leading":
        return
    if "solver" in given:
        advice = "remove it: solvers are for full spectra"
        raise SweepError("spectrum.solver", fields.solver, without, advice)
    if "count" not in given:
        allowed = allowed_in_words(by_file_name(SpectrumFields)["count"])
        raise SweepError("spectrum.count", "nothing", allowed, "add this field, or write extent: auto")


def _check_windows(fields: SpectrumFields, size: int, windows: WindowSettings) -> None:
    """Refuse windows that go past the ranks of a leading spectrum.

    Of an antisymmetric part they are `count`. Ranks of a symmetric part mix both signs and are complete for
    `count` of them at least, and at best for twice as many, which no one knows before.
    """
    needed = ranks_needed(windows, size)
    if needed <= fields.count:
        return
    last = max((rule.last for rule in windows.rules), key=lambda growth: growth.at(size))
    end = f"windows.to {last}, which at size {size} ends at rank {last.at(size):.6g}"
    advice = "end the windows earlier, or ask for more"
    raise SweepError("spectrum.count", str(fields.count), f"at least {needed}, for {end}", advice)


def _quicker(fields: SpectrumFields, size: int, needed: int) -> SpectrumSettings:
    """Full or leading at one size: a function of size, windows and forecasts, and not of this machine."""
    count = fields.count or STEP * ceil(needed * (1 + MARGIN) / STEP)
    if needed > count or count > MOST_LEADING:
        most = count if needed > count else MOST_LEADING
        return _full(fields, f"the windows take {needed} ranks, leading ones are {most}")
    if size < smallest_for(count):
        return _full(fields, f"{count} of each sign are too many: they take {smallest_for(count)} elements")
    # as for a packed relation, so that all ensembles and operators have the same extent
    leading = leading_seconds(size, count, dominance=False)
    full = max(full_seconds(size, part, fields.solver) for part in PARTS)
    why = f"about {_seconds(leading)} an order, full {_seconds(full)}"
    return _leading(fields, size, count, why) if leading < full else _full(fields, why)


def _leading(fields: SpectrumFields, size: int, count: int, why: str) -> SpectrumSettings:
    if size < smallest_for(count):
        why += f"; below {smallest_for(count)} elements all are computed, and the ends kept"
    return SpectrumSettings("leading", count, fields.tolerance or TOLERANCE, "auto", why)


def _full(fields: SpectrumFields, why: str) -> SpectrumSettings:
    return SpectrumSettings("full", None, None, fields.solver, why)


def _seconds(seconds: float) -> str:
    return f"{seconds:.2g} s" if seconds < 1 else f"{seconds:,.0f} s"
