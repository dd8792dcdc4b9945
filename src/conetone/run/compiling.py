"""What a person sees while kernels are compiled: nothing, if it takes no time."""

import sys
import threading
from collections.abc import Iterator

from rich.console import Console

# Importing and loading finished kernels takes one or two on a busy machine.
UNSEEN_SECONDS = 3.0


def show_compiling(kernels: Iterator[tuple[str, int, int]], *, quiet: bool) -> None:
    """Work through (name of the next kernel, its number from 0, number of all).

    What takes longer than UNSEEN_SECONDS is said on standard error: on a terminal as a line that changes and
    goes, else once.
    """
    console = Console(stderr=True, quiet=quiet)
    status = console.status("")
    line = ""

    def appear() -> None:
        if console.is_terminal:
            status.start()
        elif line and not quiet:
            print(line, file=sys.stderr, flush=True)

    timer = threading.Timer(UNSEEN_SECONDS, appear)
    timer.daemon = True
    timer.start()
    try:
        for name, number, total in kernels:
            line = f"Compiling kernels for this processor, once: {number + 1} of {total} ({name})"
            status.update(line)
    finally:
        timer.cancel()
        timer.join()
        status.stop()
