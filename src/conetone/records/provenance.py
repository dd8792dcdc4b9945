"""The software, and the number of BLAS threads, that a table was made with."""

import platform
from functools import cache
from importlib.metadata import version

from threadpoolctl import threadpool_info

from conetone import __version__


@cache
def software() -> dict[str, str]:
    """Names and versions, the BLAS and its threads included; eigenvalues depend on them in the last bits."""
    packages = {name: version(name) for name in ("numpy", "scipy", "pyarrow")}
    blas = [
        f"{pool['internal_api']} {pool['version']} {pool.get('architecture', '')},"
        f" {pool['num_threads']} threads"
        for pool in threadpool_info()
        if pool["user_api"] == "blas"
    ]
    return {
        "conetone": __version__,
        "python": platform.python_version(),
        "platform": platform.platform(),
        "blas": "; ".join(sorted(set(blas))),
        **packages,
    }


def blas_threads() -> int:
    """Largest number of threads that a loaded BLAS uses in this process; 1 if there is none."""
    return max((pool["num_threads"] for pool in threadpool_info() if pool["user_api"] == "blas"), default=1)
