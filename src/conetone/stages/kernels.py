"""Errand before a run: compile every kernel, so that jobs find them in the cache."""

from collections.abc import Iterator
from importlib import import_module

from conetone.kernels import compile_kernels

# Every module that has kernels, or imports one that has.
MODULES = (
    "conetone.diagonalise.full",
    "conetone.diagonalise.leading",
    "conetone.operators.dominance",
    "conetone.operators.packed",
    "conetone.sprinkle.catalogue",
)


def compile_all() -> Iterator[tuple[str, int, int]]:
    """Compile, or load from the cache, every kernel of conetone.

    Yields (name of the next kernel, its number from 0, number of all) before each one.
    """
    for module in MODULES:
        import_module(module)
    yield from compile_kernels()
