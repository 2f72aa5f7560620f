"""Playing a run back on the terminal: reads keys, moves the deck, shows frames."""

from __future__ import annotations

import contextlib
import os
import select
import sys
import time
from collections.abc import Iterator
from pathlib import Path

from rich.console import RenderableType
from rich.live import Live
from rich.text import Text

from rigd.adapters.journal_reader import JournalReader
from rigd.console.output import Output
from rigd.console.playback import HELP, Deck
from rigd.console.watch_state import Told, Watched
from rigd.console.watch_view import view
from rigd.model.errors import JournalError
from rigd.runtime.film import Film, Frame

FRAME_S = 0.1
ARROWS = {"\x1b[A": "up", "\x1b[B": "down", "\x1b[C": "right", "\x1b[D": "left"}


def watch_run(output: Output, run: Path, from_s: float, speed: float) -> None:
    """Play a run until q; where there is no terminal, show the frame at ``from_s`` and leave."""
    with JournalReader(run) as journal:
        film = Film(journal)
        if not film.last:
            raise JournalError(f"{journal.path} holds no scan: there is nothing to see")
        deck = Deck(film.start_ns, film.end_ns, film.chapters_ns, speed=speed).moved(round(from_s * 1e9))
        if output.json or not output.people.is_terminal or not sys.stdin.isatty():
            frame = film.at(deck.position_ns)
            output.document({"run": _run(film, run), **(frame.snapshot if frame else {})})
            output.say(picture(film, run, deck, frame, output.people.width))
            return
        with _raw_keys(), Live(console=output.people, screen=True, auto_refresh=False) as live:
            last_s = time.monotonic()
            while not deck.left:
                frame = film.step(deck.step) if deck.step else film.at(deck.position_ns)
                if deck.step and frame is not None:
                    deck = deck.shown(frame.now_ns)
                live.update(picture(film, run, deck, frame, output.people.width), refresh=True)
                keys = _keys(FRAME_S)
                now_s = time.monotonic()
                deck, last_s = deck.passed(now_s - last_s), now_s
                for key in keys:
                    deck = deck.pressed(key)


def picture(film: Film, run: Path, deck: Deck, frame: Frame | None, width: int) -> RenderableType:
    """The screen: that of ``rigd watch``, with the deck below."""
    if frame is None:
        return Text("nothing was recorded")
    events = tuple(Told(e.kind.value, e.subject, e.t_ns / 1e9, e.text, dict(e.fields)) for e in frame.events)
    watched = Watched({"run": _run(film, run), **frame.snapshot}, events)
    going = f"×{deck.speed:g}" if deck.playing else "paused"
    foot = f"PLAYBACK {going}  scan {frame.number} of {film.last}  {frame.now_ns / 1e9:.2f} s\n{HELP}"
    return view(watched, film.recorded.program.rig, film.recorded.program.path, width, foot)


def _run(film: Film, run: Path) -> dict[str, object]:
    meta = film.recorded.meta
    return {
        "id": run.name,
        "rig": meta.get("rig", ""),
        "recipe": meta.get("recipe", ""),
        "simulated": meta.get("simulated", "").lower() == "true",
    }


def keys_in(text: str) -> list[str]:
    """Keys in what a terminal sent: arrows by name, anything else by its character; unknown sequences are left out."""
    keys = []
    while text:
        if text[0] == "\x1b":
            sequence, text = text[:3], text[3:]
            keys += [ARROWS[sequence]] if sequence in ARROWS else []
        else:
            keys.append(text[0])
            text = text[1:]
    return keys


def _keys(seconds: float) -> list[str]:
    """Keys typed within this time; returns at once when there are some."""
    stdin = sys.stdin.fileno()
    ready, _, _ = select.select([stdin], [], [], seconds)
    return keys_in(os.read(stdin, 256).decode(errors="replace")) if ready else []


@contextlib.contextmanager
def _raw_keys() -> Iterator[None]:
    """Keys come one by one and unseen; the terminal is put back as it was."""
    import termios
    import tty

    stdin = sys.stdin.fileno()
    before = termios.tcgetattr(stdin)
    tty.setcbreak(stdin)
    try:
        yield
    finally:
        termios.tcsetattr(stdin, termios.TCSADRAIN, before)
