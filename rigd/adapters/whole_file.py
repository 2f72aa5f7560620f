"""Files that appear whole or not at all: written beside their place and moved into it at the end."""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager, suppress
from pathlib import Path


@contextmanager
def whole_files(*paths: Path) -> Iterator[tuple[Path, ...]]:
    """Give the paths to write to; when all went well the files are moved to ``paths``, each in one step, else nothing
    is left and what was there stays. Makes missing folders. Raises ``OSError``."""
    for path in paths:
        path.parent.mkdir(parents=True, exist_ok=True)
    unfinished = tuple(path.with_name(f".{path.name}.part") for path in paths)
    try:
        yield unfinished
        for written, path in zip(unfinished, paths, strict=True):
            written.replace(path)
    except OSError as error:
        names = {str(written): path for written, path in zip(unfinished, paths, strict=True)}
        if wanted := names.get(str(error.filename)):
            raise OSError(error.errno, error.strerror, str(wanted)) from error
        raise
    finally:
        for written in unfinished:
            with suppress(OSError):
                written.unlink(missing_ok=True)


def write_whole(path: Path, text: str) -> Path:
    """Write one text file whole or not at all; returns its path. Raises ``OSError``."""
    with whole_files(path) as (unfinished,):
        unfinished.write_text(text, encoding="utf-8")
    return path
