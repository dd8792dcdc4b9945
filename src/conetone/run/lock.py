"""One run of a sweep at a time: a lock that dies with its process, and a record of who holds it."""

import fcntl
import json
import os
import socket
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import asdict, dataclass
from datetime import UTC, datetime
from pathlib import Path

from conetone.errors import ConetoneError, LiveRunError

LOCK_FILE = Path(".run") / "lock"


@dataclass(frozen=True)
class Holder:
    """The run that holds, or last held, a lock."""

    process: int
    host: str
    since: str

    @classmethod
    def this_process(cls) -> "Holder":
        """The record of this process."""
        return cls(os.getpid(), socket.gethostname(), f"{datetime.now(UTC):%Y-%m-%d %H:%M:%S} UTC")

    def __str__(self) -> str:
        return f"process {self.process} on {self.host}, since {self.since}"


@contextmanager
def run_lock(folder: Path) -> Iterator[None]:
    """Hold the lock of a sweep's folder; raises LiveRunError, naming the holder, if another run has it.

    The lock is the operating system's (flock): it ends with the process, however that dies, so there is no
    stale lock to clear, and child processes do not inherit it.
    """
    path = folder / LOCK_FILE
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
        file = path.open("a+", encoding="utf-8")
    except OSError as error:
        raise ConetoneError(
            f"{error.filename}: cannot be written ({error.strerror}); choose --results"
        ) from None
    with file:
        try:
            fcntl.flock(file, fcntl.LOCK_EX | fcntl.LOCK_NB)
        except BlockingIOError:
            raise LiveRunError(
                f"{folder}: another run of this sweep is live, {_holder(path)}; wait for it, or stop it"
            ) from None
        file.truncate(0)
        file.write(json.dumps(asdict(Holder.this_process())))
        file.flush()
        yield


def _holder(path: Path) -> str:
    try:
        return str(Holder(**json.loads(path.read_text(encoding="utf-8"))))
    except (OSError, ValueError, TypeError):
        return "its holder not recorded yet"
