"""What a person sees while a sweep runs: what is done, what runs, the time left."""

import re
import sys
import time
from collections.abc import Mapping
from pathlib import Path
from typing import Any, Protocol

from rich.console import Console
from rich.progress import BarColumn, Progress, TextColumn

from conetone.sweep.calibration import Calibration
from conetone.sweep.plan import Job, Plan

# A line of plain text at most this often, when the output is no terminal.
PLAIN_SECONDS = 10.0
BLOCK_NUMBER, HASH = re.compile("b[0-9]+"), re.compile("[0-9a-f]{8}")


class Tally:
    """Jobs planned, running, finished and failed, from Snakemake's events; times in seconds."""

    def __init__(self, plan: Plan | Calibration, folder: Path, cores: int) -> None:
        self._plan, self._cores = plan, cores
        self._missing = plan.missing(folder)
        self._described: dict[int, tuple[str, str]] = {}
        self._running: dict[int, float] = {}
        self._finished: set[int] = set()
        self.failed: list[dict[str, Any]] = []
        self.total = 0
        self._forecast = 0.0
        self._start = time.monotonic()

    def take(self, event: Mapping[str, Any]) -> None:
        """Count one event."""
        if event["event"] == "planned":
            counts = {stage: count for stage, count in event["jobs"].items() if stage in self._plan.jobs}
            self.total = sum(counts.values())
            self._forecast = sum(self._stage_forecast(stage, count) for stage, count in counts.items())
            self._start = time.monotonic()
        elif event["event"] == "described" and event["rule"] in self._plan.jobs:
            self._described[event["job"]] = (event["rule"], event["name"].replace(" ", ".") or "all")
        elif event["event"] == "started":
            self._running.update(dict.fromkeys(event["jobs"], time.monotonic()))
        elif event["event"] == "finished":
            self._running.pop(event["job"], None)
            if event["job"] in self._described:
                self._finished.add(event["job"])
        elif event["event"] == "failed":
            self._running.pop(event["job"], None)
            stage, name = self._described.get(event["job"], ("", ""))
            self.failed.append({"stage": stage, "name": name, "logs": event["logs"]})

    def _stage_forecast(self, stage: str, count: int) -> float:
        missing = [job.seconds for job in self._missing if job.stage == stage]
        if len(missing) == count:
            return sum(missing)
        known = [job.seconds for job in self._plan.jobs[stage].values()]
        return count * sum(known) / len(known)

    def _job(self, number: int) -> Job | None:
        stage, name = self._described.get(number, ("", ""))
        return self._plan.jobs[stage].get(name) if stage else None

    @property
    def done(self) -> int:
        """Jobs finished."""
        return len(self._finished)

    @property
    def running(self) -> list[str]:
        """What runs now, in words, longest-running first."""
        jobs = (self._job(number) for number in sorted(self._running, key=self._running.__getitem__))
        return [f"{job.stage} {_short(job)}" for job in jobs if job]

    @property
    def seconds_left(self) -> float | None:
        """Forecast of the time left, scaled by how the finished jobs kept to theirs; None before the plan."""
        if not self.total:
            return None
        finished = sum(job.seconds for number in self._finished if (job := self._job(number)))
        elapsed = time.monotonic() - self._start
        under_way = sum(
            min(time.monotonic() - start, job.seconds)
            for number, start in self._running.items()
            if (job := self._job(number))
        )
        pace = elapsed / (finished + under_way) if finished else 1 / self._cores
        return max(self._forecast - finished - under_way, 0) * pace

    @property
    def share(self) -> float:
        """Share of the forecast work that is finished, 0 to 1."""
        finished = sum(job.seconds for number in self._finished if (job := self._job(number)))
        return min(finished / self._forecast, 1.0) if self._forecast else 0.0


def _short(job: Job) -> str:
    """`minkowski-diamond-dimension3-n1024` instead of the whole file name."""
    stem, _, rest = job.name.partition(".")
    words = stem.split("-")
    while len(words) > 1 and (BLOCK_NUMBER.fullmatch(words[-1]) or HASH.fullmatch(words[-1])):
        words.pop()
    return "-".join(words) + (f" {rest}" if rest else "")


def duration(seconds: float) -> str:
    """`45 s`, `3 min 20 s`, `2 h 5 min`."""
    whole = round(seconds)
    if whole < 60:
        return f"{whole} s"
    if whole < 3600:
        return f"{whole // 60} min {whole % 60} s"
    return f"{whole // 3600} h {whole % 3600 // 60} min"


class Display(Protocol):
    """Shows a tally as it changes."""

    def show(self, tally: Tally) -> None:
        """Show it now."""

    def close(self) -> None:
        """Take the display off the screen."""


class NoDisplay:
    """Shows nothing."""

    def show(self, tally: Tally) -> None:
        """Nothing."""

    def close(self) -> None:
        """Nothing."""


class LiveDisplay:
    """One live line with a bar, on a terminal."""

    def __init__(self, console: Console) -> None:
        self._progress = Progress(
            BarColumn(bar_width=20), TextColumn("{task.description}"), console=console, transient=True
        )
        self._task = self._progress.add_task("planning", total=1.0)
        self._width = console.width
        self._progress.start()

    def show(self, tally: Tally) -> None:
        """Redraw the line."""
        text = _line(tally)
        self._progress.update(self._task, completed=tally.share, description=text[: self._width - 24])

    def close(self) -> None:
        """Remove the line."""
        self._progress.stop()


class PlainDisplay:
    """A line of text now and then, where the output is a file or a pipe."""

    def __init__(self) -> None:
        self._last = (0.0, -1)

    def show(self, tally: Tally) -> None:
        """Print a line if the last one is old and something has changed."""
        now = time.monotonic()
        if tally.total and tally.done != self._last[1] and now - self._last[0] > PLAIN_SECONDS:
            print(_line(tally), file=sys.stderr, flush=True)
            self._last = (now, tally.done)

    def close(self) -> None:
        """Nothing stays open."""


def _line(tally: Tally) -> str:
    left = tally.seconds_left
    if left is None:
        return "planning"
    running = tally.running
    words = (
        running[0] + (f" and {len(running) - 1} more" if len(running) > 1 else "") if running else "nothing"
    )
    return f"{tally.done} of {tally.total} jobs done, about {duration(left)} left, running: {words}"
