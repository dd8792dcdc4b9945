"""A Snakemake logger that writes what happens as JSON lines, for `conetone run` to follow.

Snakemake finds it by its name; `--logger conetone --logger-conetone-events FILE` switches it on.
"""

import json
import logging
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any, Optional

from snakemake_interface_logger_plugins.base import LogHandlerBase
from snakemake_interface_logger_plugins.common import LogEvent
from snakemake_interface_logger_plugins.settings import LogHandlerSettingsBase


@dataclass
class LogHandlerSettings(LogHandlerSettingsBase):
    """Settings of the handler."""

    events: Optional[Path] = field(  # noqa: UP045 - Snakemake reads this form only
        default=None, metadata={"help": "File that receives one JSON line an event."}
    )


class LogHandler(LogHandlerBase):
    """Appends the events that a progress display needs."""

    def __post_init__(self) -> None:
        """Open the events file; line-buffered, so that a reader sees every whole event."""
        events = getattr(self.settings, "events", None)
        if events is None:
            raise ValueError("--logger conetone needs --logger-conetone-events FILE")
        self._file = Path(events).open("a", encoding="utf-8", buffering=1)  # noqa: SIM115 - closed in close()

    def emit(self, record: logging.LogRecord) -> None:
        """Write one event, if it is of interest."""
        event = self._event(record.__dict__)
        if event:
            self._file.write(json.dumps(event) + "\n")

    def close(self) -> None:
        """Close the file."""
        self._file.close()
        super().close()

    @staticmethod
    def _event(values: dict[str, Any]) -> dict[str, Any] | None:
        kind = values.get("event")
        if kind == LogEvent.RUN_INFO:
            return {"event": "planned", "jobs": dict(values["stats"])}
        if kind == LogEvent.JOB_INFO:
            return {
                "event": "described",
                "job": values["jobid"],
                "rule": values["rule_name"],
                "name": " ".join(str(value) for value in dict(values["wildcards"] or {}).values()),
            }
        if kind == LogEvent.JOB_STARTED:
            return {"event": "started", "jobs": list(values["jobs"])}
        if kind == LogEvent.JOB_FINISHED:
            return {"event": "finished", "job": values["job_id"]}
        if kind == LogEvent.JOB_ERROR:
            return {
                "event": "failed",
                "job": values["jobid"],
                "logs": [str(log) for log in values["log"] or []],
            }
        return None

    @property
    def writes_to_stream(self) -> bool:
        """Events go to a file of their own; Snakemake's text goes where it always goes."""
        return False

    @property
    def writes_to_file(self) -> bool:
        """Yes: the events file."""
        return True

    @property
    def has_filter(self) -> bool:
        """Events are chosen in `emit`."""
        return True

    @property
    def has_formatter(self) -> bool:
        """Events are formatted in `emit`."""
        return True

    @property
    def needs_rulegraph(self) -> bool:
        """No."""
        return False

    @property
    def baseFilename(self) -> str:  # noqa: N802 - Snakemake asks a file handler for this name
        """The events file, which Snakemake lists among its logs."""
        return self._file.name
