"""What stops each device when control dies: the exact bytes, as the guard will send them."""

from __future__ import annotations

from collections.abc import Sequence

from rich import box
from rich.console import RenderableType
from rich.table import Table
from rich.text import Text

from rigd.model.devices import LastWill, WillFrame


def wills_facts(wills: Sequence[LastWill], last_resorts: frozenset[str]) -> list[dict[str, object]]:
    """The last wills for programs; bytes as hexadecimal digits, a good reply as a bytes regular expression."""
    return [
        {
            "device": will.device,
            "link": will.link.id,
            "port": will.link.port,
            "last_resort": will.device in last_resorts,
            "frames": [_frame(frame) for frame in will.frames],
            "check": [_frame(frame) for frame in will.check],
        }
        for will in wills
    ]


def wills_table(wills: Sequence[LastWill], last_resorts: frozenset[str]) -> RenderableType:
    """The last wills for people, in the order in which they are sent."""
    table = Table(box=box.SIMPLE_HEAD, pad_edge=False, title="last wills, sent by the guard", title_justify="left")
    table.add_column("device")
    table.add_column("link")
    table.add_column("sends", overflow="fold")
    table.add_column("good answer (a pattern)", overflow="fold")
    for will in wills:
        name = f"{will.device} (last resort)" if will.device in last_resorts else will.device
        for frame in (*will.frames, *will.check):
            table.add_row(name, will.link.id, Text(_shown(frame.request)), Text(_shown(frame.good_reply) or "any"))
            name = ""
    return table


def _frame(frame: WillFrame) -> dict[str, object]:
    return {"request": frame.request.hex(), "good_reply": frame.good_reply.hex(), "timeout_s": frame.reply_timeout_s}


def _shown(data: bytes) -> str:
    """Printable text as it is, other bytes as in a bytes literal."""
    return repr(data)[2:-1].replace("\\\\", "\\")
