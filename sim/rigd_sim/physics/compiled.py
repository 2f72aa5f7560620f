"""The one door to the just-in-time compiler: kernels are plain Python loops over arrays, compiled once and cached
on disk."""

from __future__ import annotations

from collections.abc import Callable
from typing import TypeVar, cast

import numba
import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]
F = TypeVar("F", bound=Callable[..., object])


def compiled(function: F) -> F:
    """Compile a kernel; the cache lies beside the source, so a person waits for it once."""
    return cast(F, numba.njit(cache=True, error_model="numpy", no_cfunc_wrapper=True)(function))


def inner(function: F) -> F:
    """Compile a function that only kernels call: no way in from Python, so it is ready sooner."""
    options = {"cache": True, "error_model": "numpy", "no_cfunc_wrapper": True, "no_cpython_wrapper": True}
    return cast(F, numba.njit(**options)(function))
