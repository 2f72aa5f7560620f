"""A device made of paper: it answers by the book of tests/transcripts and moves nothing.

For each request it knows the last answer that the chosen dialogues give; ``say`` writes other answers in. About frames
it follows the manual: silence for a wrong checksum or a foreign address; a repeated number is not carried out twice.
"""

from __future__ import annotations

import re

from fakes import transcripts

_REQUEST = re.compile(rb"\{(\d\d)([0-9A-F]{2}) ([^{}]+)\}([0-9A-F]{4})\r?\n")
_FRAME = re.compile(rb"[{(]\d\d[0-9A-F]{2} ([^{}()]*)[})][0-9A-F]{4}")


class PaperDevice:
    """``feed`` takes bytes from the line and returns the bytes of the answers."""

    def __init__(self, transcript: str, *titles: str) -> None:
        self.plain = transcript == "chiller"
        self.book: dict[str, str] = {}
        self.carried_out: list[str] = []
        self.heard: list[bytes] = []
        self._kept = b""
        self._last: tuple[bytes, bytes] = (b"", b"")
        dialogues = [d for d in transcripts.load(transcript) if not titles or d.title in titles]
        assert dialogues, f"no dialogue {titles} in {transcript}"
        self.address = b""
        for exchange in (e for dialogue in dialogues for e in dialogue.exchanges if e.reply):
            assert exchange.reply is not None
            if not self.plain:
                self.address = exchange.request[1:3]
            self.book[meaning(exchange.request)] = meaning(exchange.reply)

    def say(self, words: str, answer: str) -> None:
        """From now on answer so."""
        self.book[words] = answer

    def feed(self, data: bytes) -> bytes:
        """The answers to all whole requests in ``data``."""
        self._kept += data
        end = b"\r" if self.plain else b"\n"
        *lines, self._kept = self._kept.split(end)
        return b"".join(self._answer(line + end) for line in lines)

    def _answer(self, line: bytes) -> bytes:
        self.heard.append(line)
        if self.plain:
            words = line[:-1].decode("ascii", "replace")
            self.carried_out.append(words)
            return self.book.get(words, "ERR WORD").encode() + b"\r\n"
        found = _REQUEST.search(line)
        if found is None or found[1] != self.address:
            return b""
        start, end = found.start(), found.end(3) + 1
        if int(found[4], 16) != transcripts.crc16(line[start:end]):
            return b""
        if found[2] != self._last[0]:
            words = found[3].decode()
            self.carried_out.append(words)
            self._last = (found[2], reply(found[1], found[2], self.book.get(words, f"no word {words}")))
        return self._last[1]


def reply(address: bytes, number: bytes, text: str) -> bytes:
    """A well-formed reply frame of the bracket protocol."""
    body = b"(" + address + number + b" " + text.encode() + b")"
    return body + b"%04X\n" % transcripts.crc16(body)


def meaning(frame: bytes) -> str:
    """The words of a request or reply without address, number and checksum."""
    found = _FRAME.search(frame)
    return found[1].decode() if found is not None else frame.decode("ascii").rstrip("\r\n")
