"""A folder as a link (``folder:///data/ir``): answers letters about files that have become whole since it was opened.

A file is offered when its size and time of change have stayed the same for a while *by our own monotonic clock*; its
time is compared with itself only, so a computer with a wrong clock does no harm. What was there at the first look is
of before. Files of other names, hidden ones, and the half-written ones of careful writers (``.tmp``, ``.part``, ``~``)
are not looked at. A file that is written anew is offered anew. All file access is in a thread: a share that hangs costs
a time-out, and only one thread.
"""

from __future__ import annotations

import asyncio
import json
import os
import time
from collections.abc import Callable
from dataclasses import dataclass
from fnmatch import fnmatch
from pathlib import Path
from urllib.parse import unquote, urlsplit

from rigd.adapters.inbox import Inbox
from rigd.model.errors import LinkClosed, LinkError, LinkTimeout

SCHEME = "folder://"
SIZE_MAX = 8 << 20
_UNFINISHED = (".tmp", ".part", ".crdownload", "~")


@dataclass(slots=True)
class _Seen:
    size: int
    changed_ns: int
    since_s: float
    first: int
    taken: bool


class FolderWatch:
    """The looking itself; blocking, called by one thread at a time. ``now_s`` is monotonic."""

    def __init__(self, folder: Path, now_s: Callable[[], float] = time.monotonic) -> None:
        self.folder, self._now_s = folder, now_s
        self._files: dict[str, _Seen] = {}
        self._pattern, self._quiet_s = "*", 1.0
        self._count = 0

    def watch(self, pattern: str, quiet_s: float) -> None:
        """Say what counts. Everything there now is of before; ``OSError`` when the folder cannot be read."""
        self._pattern, self._quiet_s = pattern, quiet_s
        self._files = {}
        self._look()
        for seen in self._files.values():
            seen.taken = True

    def next(self) -> tuple[str, bytes] | None:
        """The file that appeared first among those that are whole and not offered yet; ``OSError`` as above."""
        self._look()
        now_s = self._now_s()
        whole = [
            (seen.first, name)
            for name, seen in self._files.items()
            if not seen.taken and seen.size and now_s - seen.since_s >= self._quiet_s
        ]
        for _, name in sorted(whole):
            seen = self._files[name]
            seen.taken = True
            if seen.size > SIZE_MAX:
                continue
            data = (self.folder / name).read_bytes()
            if len(data) == seen.size:
                return name, data
            seen.taken = False  # it grew while it was read
        return None

    def _look(self) -> None:
        found: dict[str, _Seen] = {}
        with os.scandir(self.folder) as entries:
            for entry in sorted(entries, key=lambda entry: entry.name):
                name = entry.name
                if not self._counts(name) or not entry.is_file():
                    continue
                stat = entry.stat()
                before = self._files.get(name)
                if before is not None and (before.size, before.changed_ns) == (stat.st_size, stat.st_mtime_ns):
                    found[name] = before
                    continue
                self._count += 1
                first = before.first if before is not None and not before.taken else self._count
                found[name] = _Seen(stat.st_size, stat.st_mtime_ns, self._now_s(), first, taken=False)
        self._files = found

    def _counts(self, name: str) -> bool:
        low = name.lower()
        return not low.startswith(".") and not low.endswith(_UNFINISHED) and fnmatch(low, self._pattern.lower())


class FolderLink:
    """Implements ``rigd.ports.link.Link``: a letter in is one line of JSON, a letter out one line and its bytes."""

    def __init__(self, watch: FolderWatch) -> None:
        self._watch = watch
        self._loop = asyncio.get_running_loop()
        self._inbox = Inbox(self._loop, most=2 * SIZE_MAX)
        self._job: asyncio.Future[bytes] | None = None

    async def write(self, data: bytes) -> None:
        """Take a letter; the answer comes by ``read``. ``LinkTimeout`` while the folder has not answered the last."""
        self._inbox.check()
        if self._job is not None and not self._job.done():
            raise LinkTimeout(f"{self._watch.folder} does not answer: is the share gone?")
        self._job = self._loop.run_in_executor(None, self._answer, data)
        self._job.add_done_callback(self._deliver)

    async def read(self) -> bytes:
        """Wait for the answer."""
        return await self._inbox.read()

    def drain_input(self) -> bytes:
        """Forget an answer that nobody fetched: its file will be missing."""
        return self._inbox.drain()

    async def close(self) -> None:
        """Nothing is held open."""
        self._inbox.end(f"{self._watch.folder} was closed")
        self._inbox.forget()

    def _deliver(self, job: asyncio.Future[bytes]) -> None:
        if not job.cancelled():
            self._inbox.put(job.result())

    def _answer(self, letter: bytes) -> bytes:
        asked = json.loads(letter)
        data = b""
        try:
            if asked["ask"] == "watch":
                self._watch.watch(str(asked["files"]), float(asked["quiet_s"]))
                told: dict[str, object] = {}
            elif asked["ask"] == "next":
                found = self._watch.next()
                name, data = found or ("", b"")
                told = {"name": name}
            else:
                told = {"folder": str(self._watch.folder)}
        except OSError as error:
            told = {"trouble": f"{self._watch.folder} cannot be read: {error.strerror or error}"}
        return json.dumps({**told, "bytes": len(data)}).encode() + b"\n" + data


def open_folder(port: str) -> FolderWatch:
    """The watch of ``folder:///absolute/path``; ``LinkError`` when it is not one. Blocking."""
    parts = urlsplit(port)
    folder = Path(unquote(parts.path))
    if parts.netloc or not folder.is_absolute():
        raise LinkError(f"port {port!r}: write folder:// and an absolute path, as in folder:///data/ir")
    try:
        os.scandir(folder).close()
    except OSError as error:
        raise LinkClosed(f"folder {folder} cannot be read: {error.strerror}") from error
    return FolderWatch(folder)
