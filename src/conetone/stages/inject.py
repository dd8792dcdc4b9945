"""Stage inject: synthetic spectra of known exponent, fitted and extrapolated as the measured series is."""

import math
from functools import cached_property
from pathlib import Path
from typing import Any

from conetone.aggregate.coverage import Ground, Pipeline, Recovered, holds_logarithm, run_injection
from conetone.aggregate.truths import truths_for
from conetone.fit.size import ESTIMATORS, SizeSpectra
from conetone.records.files import inputs_digest, read_rows
from conetone.records.tables import INJECTIONS
from conetone.sprinkle.catalogue import PARAMETER_NAMES
from conetone.stages.block import run_block
from conetone.stages.fit import SPECTRA_COLUMNS, usable_spectra
from conetone.sweep.paths import spectra_path
from conetone.sweep.requests import InjectRequest
from conetone.sweep.seeds import Purpose, generator_for

RESULTS = ("exponent", "statistical", "systematic")


def inject_block(request: InjectRequest, output: Path, *, own_process: bool = False) -> None:
    """Write one block of injections; see run_block for interruptions and `own_process`."""
    injector = _Injector(request)
    run_block(
        output,
        INJECTIONS,
        request.text(),
        range(request.first, request.stop),
        injector.compute,
        injector.empty,
        still_valid=lambda row: row["spectra"] == injector.inputs,
        inputs=injector.inputs,
        own_process=own_process,
        number="injection",
    )


class _Injector:
    """The measured series, read once and only if there is an injection left to make."""

    def __init__(self, request: InjectRequest) -> None:
        self.request = request
        operator = request.fit.series.operator
        self._paths = {
            size: [spectra_path(block, operator) for block in request.fit.blocks(size)]
            for size in request.fit.sizes
        }
        self.inputs = inputs_digest([path for paths in self._paths.values() for path in paths])
        logarithm = holds_logarithm(request.fit.windows.models)
        dimension = request.fit.series.choice.dimension
        self._truth = truths_for(logarithm=logarithm, dimension=dimension)[request.truth]

    @cached_property
    def ground(self) -> Ground | str:
        """The measured series, or why it has no exponent."""
        settings = self.request.extrapolation
        pipeline = Pipeline(self.request.fit.windows, settings.omegas, settings.most_sizes_cut)
        try:
            return Ground.of([self._measured(size) for size in self._paths], pipeline)
        except ValueError as failure:
            return str(failure)

    def _measured(self, size: int) -> SizeSpectra:
        rows = [row for path in self._paths[size] for row in read_rows(path, SPECTRA_COLUMNS)]
        usable = usable_spectra(self.request.fit, rows)
        return SizeSpectra(size, usable.magnitudes, usable.complete)

    def empty(self, injection: int) -> dict[str, Any]:
        """Key columns of one injection, results null."""
        others = [f"other_{name}" for name in RESULTS]
        return {
            **self.request.fit.series.key_columns(PARAMETER_NAMES),
            "truth": self._truth.name,
            "inside": self._truth.inside,
            "injection": injection,
            "estimator": self.request.fit.windows.estimator,
            "spectra": self.inputs,
            **dict.fromkeys(("true_exponent", *RESULTS, *others)),
        }

    def compute(self, injection: int) -> dict[str, Any]:
        """Result columns of one injection."""
        ground = self.ground
        if isinstance(ground, str):
            return {"status": "failed", "reason": ground}
        generator = generator_for(self.request.seed, self.request.stream, Purpose.INJECTION, injection)
        drawn, found = run_injection(self._truth, ground, generator, ESTIMATORS)
        quoted = self.request.fit.windows.estimator
        (other,) = (recovered for name, recovered in found.items() if name != quoted)
        return {
            "true_exponent": drawn.exponent,
            **_columns("", found[quoted]),
            **_columns("other_", other),
            "status": "failed" if found[quoted].reason else "ok",
            "reason": found[quoted].reason,
        }


def _columns(prefix: str, found: Recovered) -> dict[str, float | None]:
    values = {name: getattr(found, "value" if name == "exponent" else name) for name in RESULTS}
    return {f"{prefix}{name}": None if math.isnan(value) else value for name, value in values.items()}
