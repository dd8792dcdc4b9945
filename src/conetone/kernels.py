"""Kernels compiled by Numba: one decorator, and one cache on disk for each kind of processor.

A kernel has one signature, is compiled when it is first called and kept in a folder whose name carries the
processor and the versions of compiler and package, so that nodes of different kinds can share a home
directory. Numba replaces whole files in it, so that any number of processes may start at once: each
either finds a finished kernel or compiles its own. Without a folder to write to, kernels are compiled anew
in each process.

A kernel calls only functions of its own module, whose file's change of time makes a cached kernel stale;
constants it may also take from sprinkle/relation.py, which enters the folder's name like this file.
"""

import hashlib
import os
import tempfile
import warnings
from collections.abc import Callable, Iterator
from functools import cache
from pathlib import Path
from typing import Any, TypeVar, cast

import llvmlite
import platformdirs
from llvmlite import binding
from numba import __version__ as numba_version
from numba import njit
from numba.core import config

from conetone import __version__

Function = TypeVar("Function", bound=Callable[..., Any])

# Numba's settings, some of which its stubs do not know
SETTINGS: Any = config
_KERNELS: list[tuple[str, str, Any]] = []


# What reassociating kernels allow the compiler: sums in another order, fused multiply-add.
_REASSOCIATE = {"reassoc", "contract", "nsz"}


def kernel(signature: str, *, reassociate: bool = False) -> Callable[[Function], Function]:
    """Compile a function for one signature, such as `int64(uint64[::1], int64)`, without the GIL.

    `reassociate` lets sums be taken in the order that suits the processor, as BLAS does: results then agree
    between kinds of processors within rounding only.
    """

    def decorate(function: Function) -> Function:
        folder = cache_folder()
        before = SETTINGS.CACHE_DIR
        SETTINGS.CACHE_DIR = "" if folder is None else str(folder)
        try:
            compiled = njit(
                function,
                cache=folder is not None,
                nogil=True,
                error_model="numpy",
                fastmath=_REASSOCIATE if reassociate else False,
            )
        finally:
            SETTINGS.CACHE_DIR = before
        _KERNELS.append((function.__qualname__, signature, compiled))
        return cast(Function, compiled)

    return decorate


# A function for kernels of the same module to call; compiled as a part of them.
inner = njit(error_model="numpy", nogil=True)
reassociating_inner = njit(error_model="numpy", nogil=True, fastmath=_REASSOCIATE)


def compile_kernels() -> Iterator[tuple[str, int, int]]:
    """Compile, or load from the cache, every kernel of the modules imported so far.

    Yields (name of the next kernel, its number from 0, number of all) before each one.
    """
    for number, (name, signature, compiled) in enumerate(_KERNELS):
        yield name, number, len(_KERNELS)
        compiled.compile(signature)


def compiled_signatures() -> dict[str, tuple[str, list[Any]]]:
    """For each kernel its declared signature, and those it has been compiled for."""
    return {
        f"{compiled.py_func.__module__}.{name}": (signature, list(compiled.signatures))
        for name, signature, compiled in _KERNELS
    }


@cache
def cache_folder() -> Path | None:
    """The folder of compiled kernels on this processor, made if need be; None if none can be written.

    In NUMBA_CACHE_DIR if that is set (Numba's own convention), or the user's cache folder, or a private
    folder among the temporary files.
    """
    chosen = SETTINGS.CACHE_DIR
    bases = [Path(chosen)] if chosen else [platformdirs.user_cache_path("conetone"), _private_folder()]
    for base in bases:
        folder = base / _processor_and_versions()
        if _usable(folder) and (base != _private_folder() or _is_ours_alone(base)):
            return folder
    warnings.warn(
        f"compiled kernels cannot be kept: {' and '.join(map(str, bases))} cannot be written; every process "
        "compiles its own (NUMBA_CACHE_DIR names another folder)",
        stacklevel=2,
    )
    return None


def _private_folder() -> Path:
    return Path(tempfile.gettempdir()) / f"conetone-{os.getuid()}"


def _processor_and_versions() -> str:
    features = binding.get_host_cpu_features().flatten()
    versions = f"{features} {__version__} {numba_version} {llvmlite.__version__}"
    here = Path(__file__)
    sources = [source.read_bytes() for source in (here, here.parent / "sprinkle" / "relation.py")]
    digest = hashlib.sha256(b"\n".join([versions.encode(), *sources])).hexdigest()[:12]
    return f"{binding.get_host_cpu_name()}-{digest}"


def _usable(folder: Path) -> bool:
    """Whether a folder can be made and written, and is ours: its files are run as code."""
    try:
        for each in (*reversed(folder.parents), folder):
            if not each.exists():
                each.mkdir(mode=0o700, exist_ok=True)
        with tempfile.NamedTemporaryFile(dir=folder):
            return _is_ours_alone(folder)
    except OSError:
        return False


def _is_ours_alone(folder: Path) -> bool:
    status = folder.stat()
    return status.st_uid == os.getuid() and not status.st_mode & 0o022
