"""How a run ended, from all who can tell: the journal, the guard's own record, the daemon that is still there."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from rigd.adapters.places import read_json, running_daemons
from rigd.model.events import Event, EventKind

UNFINISHED = "no end recorded"
"""Outcome of a run whose journal was never closed and of which nobody else tells: the computer died."""
RUNNING, GUARDED, LOOSE = "running", "guarded", "loose"
"""It goes on; the guard stopped the rig and every device confirmed; not every device did."""
END_TEXT = "end"
"""Key of the sentence with which the daemon ended, among the facts of a run."""
GUARD_FILE = "guard.json"
SHOWN_DETAILS = 3


@dataclass(frozen=True, slots=True)
class Ending:
    """``outcome``: that of the journal, else one of the words above; ``text``: one or two sentences."""

    outcome: str
    text: str


def ending(folder: Path, meta: Mapping[str, str], events: Sequence[Event] = ()) -> Ending:
    """How the run in ``folder`` ended, or that it goes on."""
    told = read_json(folder / GUARD_FILE)
    spoken = [event.text for event in events if event.kind is EventKind.RUN_STATE]
    last = meta.get(END_TEXT) or (spoken[-1] if spoken else "")
    if told:
        outcome = meta.get("outcome") or (LOOSE if _loose(told) else GUARDED)
        return Ending(outcome, " ".join(part for part in (last, guard_words(told)) if part))
    if "outcome" in meta:
        return Ending(meta["outcome"], last)
    return Ending(RUNNING if is_running(folder) else UNFINISHED, last)


def is_running(folder: Path) -> bool:
    """True while a daemon of this user is at work in this folder."""
    return any(Path(daemon.folder) == folder.resolve() for daemon in running_daemons())


def guard_words(told: Mapping[str, Any]) -> str:
    """What the guard did, in sentences: when, why, which devices confirmed and which did not.

    >>> told = {"why": "control ended without a word", "utc": "2030-01-01T01:02:03.004+00:00", "seconds": 0.5}
    >>> guard_words({**told, "devices": {"pump-a": {"confirmed": True, "attempts": 1, "detail": ""}}})
    'The guard took over at 2030-01-01 01:02:03 UTC, because control ended without a word. Stopped and confirmed within 0.5 s: pump-a.'
    """  # noqa: E501
    when = f" at {str(told['utc'])[:19].replace('T', ' ')} UTC" if told.get("utc") else ""
    parts = [f"The guard took over{when}, because {told.get('why', 'control failed')}."]
    loose = _loose(told)
    if confirmed := [name for name in _devices(told) if name not in loose]:
        within = f" within {told['seconds']:g} s" if isinstance(told.get("seconds"), int | float) else ""
        parts.append(f"Stopped and confirmed{within}: {', '.join(confirmed)}.")
    if loose:
        why = "; ".join(f"{name}: {detail}" for name, detail in list(loose.items())[:SHOWN_DETAILS] if detail)
        parts.append(f"NOT CONFIRMED as stopped: {', '.join(loose)}{f' ({why})' if why else ''}. Stop them by hand.")
    return " ".join(parts)


def _devices(told: Mapping[str, Any]) -> dict[str, dict[str, Any]]:
    devices = told.get("devices")
    return {str(name): state for name, state in devices.items()} if isinstance(devices, dict) else {}


def _loose(told: Mapping[str, Any]) -> dict[str, str]:
    """What did not confirm, with the last thing that was wrong."""
    states = _devices(told)
    return {name: str(state.get("detail", "")) for name, state in states.items() if not state.get("confirmed")}
