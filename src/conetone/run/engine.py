"""Snakemake as a subprocess: its command line, its environment, its events."""

import json
import os
import re
import subprocess
import sys
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

from conetone.errors import UsageError
from conetone.run.workflow import FOLDER_MARK, RESULTS_KEY, RUN_MARK, snakefile
from conetone.sweep.cost import memory_of_this_machine_mib

LOGS = Path("logs") / "run"
# Snakemake's options that conetone sets itself.
OURS = {"--config", "--configfile", "--configfiles", "--directory", "--snakefile"}
# Share of this machine's memory that jobs may claim together.
MEMORY_SHARE = 0.9


@dataclass(frozen=True)
class Engine:
    """How Snakemake is called for one sweep; `folder` is the sweep's own, `options` are passed on.

    `targets`, if not all outputs of the sweep, and `values` of the configuration beside the sweep file.
    """

    sweep_file: Path
    folder: Path
    cores: int
    options: Sequence[str] = ()
    targets: Sequence[str] = ()
    values: Mapping[str, int] = field(default_factory=dict)

    @property
    def _base_command(self) -> list[str]:
        return [
            *(sys.executable, "-m", "snakemake", "--snakefile", str(snakefile())),
            *("--configfile", str(self.sweep_file.absolute())),
            *("--config", f"{RESULTS_KEY}={json.dumps(str(self.folder.parent))}"),
            *(f"{name}={value}" for name, value in self.values.items()),
            *("--cores", str(self.cores)),
        ]

    @property
    def unlock_command(self) -> list[str]:
        """Removes Snakemake's own lock."""
        return [*self._base_command, "--unlock"]

    def __post_init__(self) -> None:
        """Refuse options that would take the sweep or its folder away from us."""
        for option in self.options:
            name = option.partition("=")[0]
            if name in OURS or re.match(r"-[Cds](?!-)", name):
                allowed = "options about how jobs run; the sweep file and --results say what and where"
                raise UsageError("options after --", option, allowed)

    @property
    def passes_through(self) -> bool:
        """Whether the options ask for a dry run, whose text is for the person, not for us."""
        return any(re.fullmatch("--dry-?run|-[npkF]*n[npkF]*", option) for option in self.options)

    def command(self, events: Path) -> list[str]:
        """The whole command line; events go to this file as JSON lines."""
        memory = int(memory_of_this_machine_mib() * MEMORY_SHARE * 1.048576)
        return [
            *self._base_command,
            *("--resources", f"mem_mb={memory}"),
            *("--logger", "conetone", "--logger-conetone-events", str(events)),
            *self.options,
            *self._asked,
        ]

    @property
    def _asked(self) -> list[str]:
        return ["--", *self.targets] if self.targets else []

    def attached(self) -> int:
        """Run Snakemake on this terminal, as it is; returns its exit code."""
        command = [*self._base_command, *self.options, *self._asked]
        return subprocess.run(command, cwd=self.folder, check=False).returncode

    def start(self) -> "RunningEngine":
        """Start Snakemake in a session of its own, so that Ctrl-C reaches only us, who stop it in order."""
        stamp = f"{datetime.now(UTC):%Y%m%dT%H%M%S.%f}"
        events, log = self.folder / LOGS / f"{stamp}.events", self.folder / LOGS / f"{stamp}.log"
        log.parent.mkdir(parents=True, exist_ok=True)
        events.touch()
        environment = {**os.environ, RUN_MARK: stamp, FOLDER_MARK: str(self.folder)}
        with log.open("wb") as text:
            process = subprocess.Popen(
                self.command(events),
                cwd=self.folder,
                env=environment,
                stdin=subprocess.DEVNULL,
                stdout=text,
                stderr=subprocess.STDOUT,
                start_new_session=True,
            )
        return RunningEngine(process, events, log)


class RunningEngine:
    """A started Snakemake; `log` holds its text."""

    def __init__(self, process: "subprocess.Popen[bytes]", events: Path, log: Path) -> None:
        self.process, self.log = process, log
        self._events = events.open(encoding="utf-8")
        self._rest = ""

    def new_events(self) -> Iterator[dict[str, Any]]:
        """Events since the last call; the last line may still be incomplete and waits."""
        lines = (self._rest + self._events.read()).split("\n")
        self._rest = lines.pop()
        for line in lines:
            yield json.loads(line)

    def close(self) -> None:
        """Stop reading events."""
        self._events.close()
