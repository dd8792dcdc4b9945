"""Which eigenvalues are computed at each size: the fields of `spectrum`, checked against each other and the
windows.
"""

from collections.abc import Collection, Sequence
from dataclasses import replace
from math import ceil

from conetone.errors import SweepError
from conetone.fit.size import WindowSettings
from conetone.fit.smoothcount import REACH
from conetone.operators.catalogue import Part
from conetone.sweep.cost import full_seconds, leading_seconds
from conetone.sweep.faults import describe
from conetone.sweep.fields import MOST_LEADING, TOLERANCE, SpectrumFields, allowed_in_words, by_file_name
from conetone.sweep.settings import SpectrumSettings, smallest_for

# Eigenvalues beyond those that the windows take, for the eye: this share, and up to the next multiple of the
# step. Windows that differ by less than a step often ask for the same number, but not across its edge.
MARGIN, STEP = 1 / 16, 8
# A smooth count takes eigenvalues beyond the smooth rank it reaches: 2.3, 2.8, 3.1, 3.3 times as many for
# exponents 1, 3/4, 2/3, 5/8. With fewer than this no exponent below 0.69 reaches the window's end, and
# REACH, which `auto` asks for, is enough from 0.62 on.
LEAST_REACH = 3.0


def resolve_spectra(
    fields: SpectrumFields, sizes: Sequence[int], windows: WindowSettings, parts: Collection[Part] = ()
) -> tuple[SpectrumSettings, ...]:
    """The settings of each size, the same for all `parts`.

    Raises SweepError for fields that contradict each other, the windows or the parts.
    """
    _check_fields(fields)
    if fields.solver == "two-stage" and "singular" in parts:
        advice = "singular values go through LAPACK; auto takes the quicker for every part"
        raise SweepError("spectrum.solver", "two-stage with the part singular", "auto or lapack", advice)
    if fields.extent == "full":
        return tuple(SpectrumSettings("full", None, None, fields.solver, "as asked") for _ in sizes)
    if fields.extent == "auto":
        return tuple(_quicker(fields, size, windows) for size in sizes)
    for size in sizes:
        _check_windows(fields, size, windows)
    return tuple(_leading(fields, size, fields.count, "as asked") for size in sizes)


def ranks_needed(windows: WindowSettings, size: int) -> int:
    """Ranks that the widest window takes at one size by the estimator quoted; with fewer it cannot be had.

    In bins of rank the upper end of a window is exclusive.
    """
    last = max(rule.last.at(size) for rule in windows.rules)
    if windows.estimator == "rank-bins":
        return max(1, ceil(last - 1))
    return max(1, ceil(LEAST_REACH * last))


def _ranks_wanted(windows: WindowSettings, size: int) -> int:
    """Ranks with which the widest window is reached and something is left to see beyond it."""
    if windows.estimator == "rank-bins":
        return ceil(ranks_needed(windows, size) * (1 + MARGIN))
    return max(1, ceil(REACH * max(rule.last.at(size) for rule in windows.rules)))


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
    """Refuse windows that go past the ranks, or their smooth count, of a leading spectrum.

    Of an antisymmetric part they are `count`. Ranks of a symmetric part mix both signs and are complete for
    `count` of them at least, and at best for twice as many, which no one knows before. Those of one sign, and
    singular values, are `count` at most.
    """
    needed = ranks_needed(windows, size)
    if needed <= fields.count:
        return
    last = max((rule.last for rule in windows.rules), key=lambda growth: growth.at(size))
    end = f"windows.to {last}, which at size {size} ends at rank {last.at(size):.6g}"
    advice = "end the windows earlier, or ask for more"
    if windows.estimator == "smooth-count":
        end = f"the smooth count of {end}"
        bins = ranks_needed(replace(windows, estimator="rank-bins"), size)
        advice += f"; windows.estimator: rank-bins takes {bins}"
    raise SweepError("spectrum.count", str(fields.count), f"at least {needed}, for {end}", advice)


def _quicker(fields: SpectrumFields, size: int, windows: WindowSettings) -> SpectrumSettings:
    """Full or leading at one size: a function of size, windows and forecasts, and not of this machine."""
    needed = ranks_needed(windows, size)
    count = fields.count or STEP * ceil(_ranks_wanted(windows, size) / STEP)
    if needed > count or count > MOST_LEADING:
        most = count if needed > count else MOST_LEADING
        return _full(fields, f"the windows take {needed} ranks, leading ones are {most}")
    if size < smallest_for(count):
        return _full(fields, f"{count} of each sign are too many: they take {smallest_for(count)} elements")
    # as for a packed relation and self-adjoint parts, so that all ensembles and operators have the same
    # extent, and another operator changes none
    leading = leading_seconds(size, count, dominance=False)
    full = max(full_seconds(size, part, fields.solver) for part in ("symmetric", "antisymmetric"))
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
