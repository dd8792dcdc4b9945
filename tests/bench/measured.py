"""Seconds and memory of a piece of code in a process of its own."""

import json
import subprocess
import sys
import textwrap
from dataclasses import dataclass


@dataclass(frozen=True)
class Measured:
    """Wall seconds, peak MiB beyond what the process held before, and whatever `result` was set to."""

    seconds: float
    mib: float
    result: object


FRAME = """
import json, os, resource, threading, time
for name in ("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS"):
    os.environ[name] = "1"
import numpy as np
result = None
{prepare}
def resident():
    with open("/proc/self/statm") as f:
        return int(f.read().split()[1]) * resource.getpagesize() / 2**20
before = peak = resident()
over = threading.Event()
def watch():
    global peak
    while not over.wait(0.005):
        peak = max(peak, resident())
watcher = threading.Thread(target=watch, daemon=True)
watcher.start()
began = time.perf_counter()
{code}
seconds = time.perf_counter() - began
over.set()
watcher.join()
print(json.dumps([seconds, max(peak, resident()) - before, result]))
"""


def measure(prepare: str, code: str) -> Measured:
    """Run `prepare`, imports and warm-up, then `code`, which is measured; Linux only."""
    script = FRAME.format(prepare=textwrap.dedent(prepare), code=textwrap.dedent(code))
    done = subprocess.run([sys.executable, "-c", script], capture_output=True, text=True, check=False)
    if done.returncode:
        raise RuntimeError(done.stderr)
    return Measured(*json.loads(done.stdout))
