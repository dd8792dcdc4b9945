"""BLAS and LAPACK routines that work in place on parts of a larger matrix.

SciPy's wrappers copy a part of a matrix before they call the library. The routines stand in
scipy.linalg.cython_blas and cython_lapack with their addresses, through which they are called here
with a leading dimension. Arrays are float64, column-major: the first axis has unit stride.
"""

import ctypes
import re
from collections.abc import Callable
from ctypes import byref, c_char, c_double, c_int, c_void_p
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import cython_blas, cython_lapack

Floats = NDArray[np.float64]

_NO, _YES = c_char(b"N"), c_char(b"T")


def multiply_into(
    target: Floats,
    left: Floats,
    right: Floats,
    *,
    scale: float = 1.0,
    keep: float = 1.0,
    transpose_left: bool = False,
    transpose_right: bool = False,
) -> None:
    """target ← keep · target + scale · left @ right, either factor transposed if asked (dgemm)."""
    rows, columns = target.shape
    if rows == 0 or columns == 0:
        return
    inner = left.shape[0] if transpose_left else left.shape[1]
    _dgemm(
        byref(_YES if transpose_left else _NO),
        byref(_YES if transpose_right else _NO),
        byref(c_int(rows)),
        byref(c_int(columns)),
        byref(c_int(inner)),
        byref(c_double(scale)),
        *_located(left),
        *_located(right),
        byref(c_double(keep)),
        *_located(target),
    )


def factor_panel(panel: Floats, triangle: Floats) -> None:
    """QR factors of a panel of shape (m, b), in place (dgeqrt, recursive).

    R stands on and above the diagonal, the reflectors V, unit lower trapezoidal, below. With k = min(m, b)
    and T the upper triangle of `triangle[:k, :k]`, Q = I − V T Vᵀ.
    """
    rows, columns = panel.shape
    reflectors = min(rows, columns)
    work = np.empty(reflectors * columns)
    _checked(
        _dgeqrt,
        byref(c_int(rows)),
        byref(c_int(columns)),
        byref(c_int(reflectors)),
        *_located(panel),
        *_located(triangle),
        work.ctypes.data,
    )


def eigenvalues_of_tridiagonal(diagonal: Floats, off_diagonal: Floats) -> Floats:
    """Eigenvalues, ascending, of a symmetric tridiagonal matrix (dsterf).

    Raises numpy.linalg.LinAlgError if the iteration does not converge.
    """
    values, rest = diagonal.copy(), off_diagonal.copy()
    _checked(_dsterf, byref(c_int(len(values))), values.ctypes.data, rest.ctypes.data)
    return values


def singular_values_of_bidiagonal(diagonal: Floats, off_diagonal: Floats) -> Floats:
    """Singular values, falling, of a square bidiagonal matrix, upper or lower (dlasq1).

    Raises numpy.linalg.LinAlgError if the iteration does not converge.
    """
    n = len(diagonal)
    values, rest, work = diagonal.copy(), np.zeros(n), np.empty(4 * n)
    rest[: n - 1] = off_diagonal
    _checked(_dlasq1, byref(c_int(n)), values.ctypes.data, rest.ctypes.data, work.ctypes.data)
    return values


def _located(array: Floats) -> tuple[int, Any]:
    """Address and leading dimension of a column-major array."""
    return array.__array_interface__["data"][0], byref(c_int(max(array.strides[1] // array.itemsize, 1)))


def _checked(routine: Callable[..., None], *arguments: Any) -> None:
    info = c_int(0)
    routine(*arguments, byref(info))
    if info.value:
        raise np.linalg.LinAlgError(f"a LAPACK iteration ended with info = {info.value}")


def _routine(module: Any, name: str, arguments: int) -> Callable[..., None]:
    capsule = module.__pyx_capi__[name]
    signature = _name_of_capsule(capsule)
    # SciPy's own builds take 32-bit integers; any other interface must not be called as if it did
    known = rf"void \(((int|char|\w+_d) \*(, |\)$)){{{arguments}}}"
    if not re.fullmatch(known, signature.decode()):
        raise ImportError(
            f"{module.__name__}.{name} has the signature {signature!r}, which is not known here"
        )
    return ctypes.CFUNCTYPE(None, *[c_void_p] * arguments)(_address_of_capsule(capsule, signature))


_name_of_capsule = ctypes.pythonapi.PyCapsule_GetName
_name_of_capsule.restype, _name_of_capsule.argtypes = ctypes.c_char_p, [ctypes.py_object]
_address_of_capsule = ctypes.pythonapi.PyCapsule_GetPointer
_address_of_capsule.restype, _address_of_capsule.argtypes = c_void_p, [ctypes.py_object, ctypes.c_char_p]

_dgemm = _routine(cython_blas, "dgemm", 13)
_dgeqrt = _routine(cython_lapack, "dgeqrt", 9)
_dsterf = _routine(cython_lapack, "dsterf", 4)
_dlasq1 = _routine(cython_lapack, "dlasq1", 5)
