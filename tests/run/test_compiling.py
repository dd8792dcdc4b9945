"""What is said while kernels are compiled: nothing, unless it takes a while."""

import os
import re
import subprocess
import sys
import time
from collections.abc import Iterator
from pathlib import Path

import pytest

from conetone.run import compiling
from conetone.run.compiling import show_compiling
from conetone.stages.kernels import MODULES

CLONE = Path(__file__).parents[2]
SOURCE = CLONE / "src"


def slow(seconds: float, done: list[str]) -> Iterator[tuple[str, int, int]]:
    for number, name in enumerate(("first", "second")):
        yield name, number, 2
        time.sleep(seconds)
        done.append(name)


@pytest.mark.parametrize(
    ("seconds", "quiet", "said"), [(0.0, False, False), (0.2, False, True), (0.2, True, False)]
)
def test_only_what_takes_a_while_is_said_and_once(
    seconds: float,
    quiet: bool,
    said: bool,
    monkeypatch: pytest.MonkeyPatch,
    capsys: pytest.CaptureFixture[str],
) -> None:
    monkeypatch.setattr(compiling, "UNSEEN_SECONDS", 0.1)
    done: list[str] = []
    show_compiling(slow(seconds, done), quiet=quiet)
    assert done == ["first", "second"]
    line = "Compiling kernels for this processor, once: 1 of 2 (first)\n"
    assert capsys.readouterr() == ("", line if said else "")


def test_every_module_with_kernels_is_compiled() -> None:
    with_kernels = {
        ".".join(path.relative_to(SOURCE).with_suffix("").parts)
        for path in SOURCE.rglob("*.py")
        if re.search(r"^@kernel\(", path.read_text(), re.MULTILINE)
    }
    assert with_kernels
    code = f"import sys\nfor m in {MODULES!r}: __import__(m)\nprint(*sys.modules)"
    imported = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True).stdout
    assert with_kernels <= set(imported.split())


def conetone(*arguments: str) -> "subprocess.CompletedProcess[str]":
    """Run it where no folder can take compiled kernels."""
    environment = {**os.environ, "NUMBA_CACHE_DIR": "/proc/nowhere"}
    command = [sys.executable, "-m", "conetone", *arguments]
    return subprocess.run(command, capture_output=True, text=True, check=False, env=environment)


def test_a_cache_that_cannot_be_written_is_one_line(tmp_path: Path) -> None:
    done = conetone("expand", str(CLONE / "config/first-look.yaml"))
    assert done.returncode == 0
    assert done.stderr.startswith(
        "conetone: compiled kernels cannot be kept: /proc/nowhere cannot be written"
    )
    assert done.stderr.count("\n") == 1
    faulty = str(CLONE / "tests/sweeps/invalid/sizes-zero.yaml")
    quiet = conetone("run", faulty, "--quiet", "--results", str(tmp_path))
    assert quiet.returncode == 2
    assert "cannot be kept" not in quiet.stderr
    assert quiet.stderr.count("\n") == 1
