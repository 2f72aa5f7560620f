"""Which decisions a program makes, as a digest of the source of the core: two builds of one version may differ."""

from __future__ import annotations

import hashlib
from functools import cache
from pathlib import Path

ROOMS = ("logic", "model")


@cache
def core_digest() -> str:
    """SHA-256 over the source files of the core, as installed; "" when they are not there to be read."""
    package = Path(__file__).parents[1]
    digest = hashlib.sha256()
    try:
        for path in sorted(path for room in ROOMS for path in (package / room).rglob("*.py")):
            digest.update(path.relative_to(package).as_posix().encode() + b"\0" + path.read_bytes())
    except OSError:
        return ""
    return digest.hexdigest()
