"""The one door to the just-in-time compiler.

Kernels are plain Python loops over arrays; compiled once, cached on disk. The compiler itself notices a change only in
the file of the outermost kernel, so the folder of a kernel's cache carries the digest of all files that it is made
from, and a change makes only the kernels new that it concerns.
"""

from __future__ import annotations

import hashlib
import re
from collections.abc import Callable
from pathlib import Path
from typing import Any, TypeVar, cast

import numba
import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]
"""A table of numbers, two dimensions."""
Ints = NDArray[np.int64]
"""A table of integers, two dimensions."""
Row = NDArray[np.float64]
"""A row of numbers, one dimension."""
IntRow = NDArray[np.int64]
"""A row of integers, one dimension."""
F = TypeVar("F", bound=Callable[..., object])

_njit: Any = numba.njit  # its type stub leaves out the two options that make it quick
_plain: Any = numba.types.unliteral
_config: Any = numba.config
_HERE = Path(__file__).parent
_OPTIONS: dict[str, Any] = {"error_model": "numpy", "no_cfunc_wrapper": True}


def _sources(path: Path, known: set[Path]) -> set[Path]:
    """This file and all of this package that it imports, directly or not."""
    if path not in known:
        known.add(path)
        for name in re.findall(r"^from rigd_sim\.physics\.(\w+) import", path.read_text("utf-8"), re.MULTILINE):
            _sources(_HERE / f"{name}.py", known)
    return known


def _cache_folder(source: Path) -> str:
    """Beside the package if that can be written, else in the user's cache; "" leaves the choice to the compiler."""
    files = sorted(_sources(source, set()))
    digest = hashlib.sha256(b"".join(path.read_bytes() for path in files)).hexdigest()[:16]
    for parent in (_HERE / "__pycache__", Path.home() / ".cache" / "rigd"):
        folder = parent / f"kernels-{digest}"
        try:
            folder.mkdir(parents=True, exist_ok=True)
            (folder / "writable").touch()
        except OSError:
            continue
        return str(folder)
    return ""


def compiled(function: F) -> F:
    """Compile a kernel that Python calls, on first use; the result goes to the cache."""
    _config.CACHE_DIR = _cache_folder(Path(function.__code__.co_filename))
    return cast(F, _njit(cache=True, **_OPTIONS)(function))


def inner(function: F) -> F:
    """Compile a function that only kernels call: no way in from Python and no place in the cache, since the kernel
    that calls it has it inside. Once for all constants that it is called with, not once for each."""
    kernel = _njit(no_cpython_wrapper=True, **_OPTIONS)(function)
    template = kernel.get_call_template
    kernel.get_call_template = lambda args, kws: template([_plain(arg) for arg in args], kws)
    return cast(F, kernel)
