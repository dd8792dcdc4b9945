"""What `conetone allocate` found, with what a reader must know besides the numbers; as JSON values, too."""

from dataclasses import dataclass
from pathlib import Path
from typing import Any

from conetone.aggregate.allocate import Allocation
from conetone.run.pilot import Pilot
from conetone.sweep.fields import MOST_REPLICATES
from conetone.sweep.plan import Plan

# Sizes that a published number takes.
ENOUGH_SIZES = 5
# So many times the replicates halve errors. Tried: a pilot of 16 at n = 128 … 512, then 5 to 15 times that;
# of two series the statistical errors came out 8 % and 65 % above the prediction.
FAR_FROM_THE_PILOT = 4.0


@dataclass(frozen=True)
class Advice:
    """An allocation of one sweep with the pilot that it rests on; `target` or `budget`, seconds, is given."""

    plan: Plan
    folder: Path
    pilot: Pilot
    found: Allocation
    target: float | None
    budget: float | None

    @property
    def sizes(self) -> tuple[int, ...]:
        """All sizes of the sweep: without one, gains and systematic errors would be others."""
        return self.plan.sweep.sizes

    @property
    def missing(self) -> list[int]:
        """Replicates still to compute, by size."""
        return [int(m) - done for m, done in zip(self.found.replicates, self.pilot.done, strict=True)]

    @property
    def missing_seconds(self) -> float:
        """Core seconds still to compute."""
        return sum(m * each.seconds for m, each in zip(self.missing, self.pilot.costs, strict=True))

    @property
    def exit_code(self) -> int:
        """1 if a series is left out or cannot reach the target."""
        return 0 if self.found.reachable.all() and not self.pilot.left_out else 1

    @property
    def fragment(self) -> list[str]:
        """Lines to paste into the sweep file."""
        return [f"sizes: {list(self.sizes)}", f"replicates: {self.found.replicates.tolist()}"]


def ratio_of(equal: float, here: float) -> float:
    """How many times as large the error of equal replicates is; 1 where neither varies."""
    return float(equal / here) if here > 0 else 1.0


def notes_of(advice: Advice) -> list[str]:
    """What a reader must know besides the numbers."""
    found, pilot = advice.found, advice.pilot
    notes = [f"Left out, without an exponent: {label}: {reason}." for label, reason in pilot.left_out.items()]
    for row, reachable, total in zip(pilot.rows, found.reachable, found.total, strict=True):
        if not reachable:
            notes.append(
                f"{row['label']}: no number of replicates reaches {advice.target:g} at these sizes, because"
                f" the systematic error alone is {row['systematic']:.3g}; larger sizes are what it takes."
                f" Attainable here: a total error above {row['systematic']:.3g}"
                + (f"; {total:.3g} with the replicates above." if found.reachable.any() else ".")
            )
    if found.reachable.any() and not any(advice.missing):
        notes.append("Nothing is left to compute: the pilot has these replicates already.")
    notes += [
        f"Size {advice.sizes[i]} enters no exponent; it is kept at the floor." for i in pilot.without_a_say
    ]
    most = max((m / max(done, 1) for m, done in zip(found.replicates, pilot.done, strict=True)), default=1.0)
    if found.reachable.any() and most > FAR_FROM_THE_PILOT:
        notes.append(
            f"Up to {most:.0f} times the pilot's replicates: as errors shrink, the weights of windows, models"
            " and scaling forms move, and with them gains and systematic errors, which are taken as the pilot"
            " found them. Compute a part of it, then ask again."
        )
    if len(advice.sizes) < ENOUGH_SIZES:
        notes.append(f"{len(advice.sizes)} sizes; a published number takes {ENOUGH_SIZES} or more.")
    if found.replicates.max() > MOST_REPLICATES:
        notes.append(
            f"A sweep takes at most {MOST_REPLICATES} replicates of a size: larger sizes, or a larger target."
        )
    return notes


def as_json_of(advice: Advice) -> dict[str, Any]:
    """All of it as JSON values; times are of one core."""
    found, pilot = advice.found, advice.pilot
    return {
        "sweep": advice.plan.sweep.name,
        "folder": str(advice.folder),
        "target": advice.target,
        "budget_core_seconds": advice.budget,
        "sizes": list(advice.sizes),
        "replicates": found.replicates.tolist(),
        "floors": pilot.design.floors.tolist(),
        "done": pilot.done,
        "to_compute": advice.missing,
        "core_seconds_of_one": [each.seconds for each in pilot.costs],
        "cost_source": [each.source for each in pilot.costs],
        "core_hours": found.cost / 3600,
        "core_hours_to_compute": advice.missing_seconds / 3600,
        "equal_replicates": found.equal_replicates,
        "series": [
            {
                "series": row["series"],
                "reachable": bool(found.reachable[i]),
                "systematic": row["systematic"],
                "statistical": float(found.statistical[i]),
                "statistical_uncertainty": float(found.statistical[i] * found.uncertainty[i]),
                "total": float(found.total[i]),
                "equal_statistical": float(found.equal_statistical[i]),
                "equal_total": float(found.equal_total[i]),
                "statistical_ratio": ratio_of(found.equal_statistical[i], found.statistical[i]),
                "total_ratio": ratio_of(found.equal_total[i], found.total[i]),
            }
            for i, row in enumerate(pilot.rows)
        ],
        "left_out": pilot.left_out,
        "notes": notes_of(advice),
    }
