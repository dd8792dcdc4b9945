"""The cache of compiled kernels: one folder a processor, many processes at once, nowhere to write."""

import os
import subprocess
import sys
import textwrap
from pathlib import Path

import pytest

from conetone import kernels

# Orders, spectra and products through many kernels, then all the others: whether each was compiled for its
# declared signature alone, and how often it was found in the cache.
EVERYTHING = """
import numpy as np
from conetone.kernels import _KERNELS, compile_kernels
from conetone.diagonalise.full import full_spectrum
from conetone.diagonalise.leading import leading_spectrum
from conetone.operators.catalogue import OPERATORS
from conetone.sprinkle.catalogue import sprinkle
order = sprinkle("minkowski-diamond", {"dimension": 3}, 400, np.random.default_rng(0))
spectrum = full_spectrum(OPERATORS["link"].matrix(order), "antisymmetric", solver="two-stage")
leading = leading_spectrum(OPERATORS["causal"].product(order, 1), "symmetric", 2)
before = {name: kernel.signatures for name, _, kernel in _KERNELS}
for _ in compile_kernels():
    pass
assert all(len(kernel.signatures) == 1 for _, _, kernel in _KERNELS), before
hits = sum(sum(kernel.stats.cache_hits.values()) for _, _, kernel in _KERNELS)
print(len(_KERNELS), hits, order.digest, spectrum.eigenvalues[-1], leading.eigenvalues[-1])
"""
# One kernel, quickly compiled.
HEIGHT = """
import numpy as np
from conetone.sprinkle.order import Order
print(Order.from_matrix(np.triu(np.ones((70, 70), dtype=bool), 1)).height)
"""
HITS = """
from conetone.sprinkle.bits import longest_chain
print(sum(longest_chain.stats.cache_hits.values()))
"""


def start(code: str, **environment: str) -> "subprocess.Popen[str]":
    return subprocess.Popen(
        [sys.executable, "-c", textwrap.dedent(code)],
        env={**os.environ, "OPENBLAS_NUM_THREADS": "1", **environment},
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
    )


def test_every_kernel_is_compiled_once_for_one_signature_and_then_found(tmp_path: Path) -> None:
    outputs = []
    for _ in range(2):
        process = start(EVERYTHING, NUMBA_CACHE_DIR=str(tmp_path))
        out, errors = process.communicate()
        assert process.returncode == 0, errors
        outputs.append(out.split())
    (number, none, *first), (again, hits, *second) = outputs
    assert number == again == hits
    assert none == "0"
    assert first == second
    (folder,) = tmp_path.iterdir()
    assert folder.name.startswith(kernels.cache_folder().name[:3])  # type: ignore[union-attr]


@pytest.mark.parametrize("number", [5, pytest.param(20, marks=pytest.mark.slow)])
def test_many_processes_at_once_with_an_empty_cache(tmp_path: Path, number: int) -> None:
    processes = [start(HEIGHT, NUMBA_CACHE_DIR=str(tmp_path)) for _ in range(number)]
    for process in processes:
        out, errors = process.communicate()
        assert (process.returncode, out, errors) == (0, "70\n", "")
    assert not list(tmp_path.rglob("*.tmp*"))  # nothing half written is left
    found = start(HEIGHT + HITS, NUMBA_CACHE_DIR=str(tmp_path))
    assert found.communicate()[0] == "70\n1\n"


@pytest.mark.parametrize("base", ["/dev/null/below", "/proc/nowhere"])
def test_with_nowhere_to_write_every_process_compiles_its_own(base: str) -> None:
    process = start(HEIGHT, NUMBA_CACHE_DIR=base)
    out, errors = process.communicate()
    assert (process.returncode, out) == (0, "70\n")
    assert f"compiled kernels cannot be kept: {base} cannot be written" in errors


def test_a_folder_of_another_user_is_not_used(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    # whatever stands in it would be run as code
    assert kernels._usable(tmp_path / "kernels")
    monkeypatch.setattr(os, "getuid", lambda: tmp_path.stat().st_uid + 1)
    assert not kernels._usable(tmp_path / "kernels")


def test_folders_tell_processors_apart(monkeypatch: pytest.MonkeyPatch) -> None:
    here = kernels._processor_and_versions()
    monkeypatch.setattr(kernels.binding, "get_host_cpu_name", lambda: "another")
    assert kernels._processor_and_versions() != here
