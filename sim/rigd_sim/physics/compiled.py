"""The one door to the just-in-time compiler.

Kernels are plain Python loops over arrays; compiled once, cached on disk. The compiler itself notices a change only in
the file of the outermost kernel, so the folder of the cache carries the digest of all files of this package.
"""

from __future__ import annotations

import hashlib
from collections.abc import Callable
from pathlib import Path
from typing import Any, TypeVar, cast

import numba
import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]
F = TypeVar("F", bound=Callable[..., object])

_njit: Any = numba.njit  # its type stub leaves out the two options that make it quick
_OPTIONS: dict[str, Any] = {"cache": True, "error_model": "numpy", "no_cfunc_wrapper": True}


def _cache_folder() -> str:
    """Beside the source if that can be written, else in the user's cache; "" leaves the choice to the compiler."""
    here = Path(__file__).parent
    digest = hashlib.sha256(b"".join(path.read_bytes() for path in sorted(here.glob("*.py")))).hexdigest()[:16]
    for parent in (here / "__pycache__", Path.home() / ".cache" / "rigd"):
        folder = parent / f"kernels-{digest}"
        try:
            folder.mkdir(parents=True, exist_ok=True)
            (folder / "writable").touch()
        except OSError:
            continue
        return str(folder)
    return ""


_config: Any = numba.config
_config.CACHE_DIR = _cache_folder()


def compiled(function: F) -> F:
    """Compile a kernel that Python calls."""
    return cast(F, _njit(**_OPTIONS)(function))


def inner(function: F) -> F:
    """Compile a function that only kernels call: no way in from Python, so it is ready sooner."""
    return cast(F, _njit(no_cpython_wrapper=True, **_OPTIONS)(function))
