"""The one door to the just-in-time compiler.

Kernels are plain Python loops over arrays; compiled once, cached on disk beside the source.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any, TypeVar, cast

import numba
import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]
F = TypeVar("F", bound=Callable[..., object])

_njit: Any = numba.njit  # its type stub leaves out the two options that make it quick
_OPTIONS: dict[str, Any] = {"cache": True, "error_model": "numpy", "no_cfunc_wrapper": True}


def compiled(function: F) -> F:
    """Compile a kernel that Python calls."""
    return cast(F, _njit(**_OPTIONS)(function))


def inner(function: F) -> F:
    """Compile a function that only kernels call: no way in from Python, so it is ready sooner."""
    return cast(F, _njit(no_cpython_wrapper=True, **_OPTIONS)(function))
