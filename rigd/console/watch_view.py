"""The picture of a running rig: a pure function from what is known to what is shown. Works from 80 columns up."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from typing import Any

from rich.cells import cell_len
from rich.console import Group, RenderableType
from rich.rule import Rule
from rich.table import Table
from rich.text import Text

from rigd.console.flow_drawing import drawing, quantity
from rigd.console.watch_state import Told, Watched
from rigd.logic.flow_path import FlowPath
from rigd.model.rig import RigDefinition

EVENTS_SHOWN, EVENTS_LEAST = 6, 3
FRAME_ROWS = 5
"""Rows besides parts, values and events: two more of the progress, two rules, the foot."""
DRAWN = (".position", ".flow", ".state")
"""Endings of tags that the flow path shows too, or that matter least, in the order in which they give way."""
FOOT = "q leaves, the run goes on; in another terminal: rigd hold, resume, stop, cut"
PRIORITY_STYLES = {1: "bold white on red", 2: "bold red", 3: "yellow", 4: "cyan"}
STOP_STYLES = {"hold": "bold black on yellow", "quench": "bold white on dark_orange3", "cut": "bold white on red"}
EVENT_STYLES = {"trip": "bold red", "alarm": "yellow", "stop": "bold yellow", "fault": "red", "point": "cyan"}
GROUPS = ("pressure", "temperature", "flow", "fraction", "concentration", "volume", "absorbance")


def view(
    state: Watched, rig: RigDefinition | None, path: FlowPath | None, width: int, foot: str = FOOT, height: int = 0
) -> RenderableType:
    """The whole screen, with a line about the keys below. On a screen of ``height`` rows (0: endless) the events give
    way first, then values that the flow path shows as well."""
    snapshot = state.snapshot
    if not snapshot:
        return Text("waiting for the first snapshot of the run ...", style="dim")
    values = _mapping(snapshot.get("values"))
    parts: list[RenderableType] = [_headline(snapshot, width), _progress_rows(snapshot, width)]
    if rig is not None and path is not None:
        parts += [Rule(style="dim"), *drawing(rig, path, values, width)]
    attention = _attention(snapshot)
    spare = height - len(parts) - len(attention) - FRAME_ROWS if height else len(values) + EVENTS_SHOWN
    table = _values(values, rig, width, spare - EVENTS_LEAST)
    parts += [Rule(style="dim"), table, *attention, Rule(style="dim")]
    parts += _events(state.events, min(EVENTS_SHOWN, max(1, spare - table.row_count)))
    if state.end:
        parts.append(Text(f"The run has ended: {state.end}.", style="bold"))
    parts.append(Text(foot, "dim"))
    return Group(*parts)


def _headline(snapshot: Mapping[str, Any], width: int) -> Text:
    """Rig and recipe, SIMULATED, stop in force, clock; wrapped, never cut."""
    run = _mapping(snapshot.get("run"))
    text = Text().append(f"{run.get('rig', '')}", style="bold")
    text.append(f"  {run.get('recipe', '')}  ", style="default")
    if run.get("simulated"):
        pace = run.get("pace", 1)
        text.append(" SIMULATED ", style="bold white on red")
        text.append(f" ×{pace:g} " if isinstance(pace, int | float) and pace != 1 else " ", style="red")
    stop = str(snapshot.get("stop", "none"))
    if stop not in ("none", ""):
        text.append(f" {stop.upper()} ", style=STOP_STYLES.get(stop, "bold"))
    clock = f"{clock_words(snapshot.get('t_s'))}"
    text.append(" " * max(1, width - cell_len(text.plain) - len(clock)))
    return text.append(clock, style="dim")


def _progress_rows(snapshot: Mapping[str, Any], width: int) -> Group:
    """Run state and phase with its bar; points done and time left."""
    phase, campaign = _mapping(snapshot.get("phase")), _mapping(snapshot.get("campaign"))
    text = Text(no_wrap=True, overflow="ellipsis").append(str(snapshot.get("state", "")), style="bold green")
    text.append(f"  {phase.get('label') or phase.get('id') or ''}", style="bold")
    step = Text(str(phase.get("step") or ""), no_wrap=True, overflow="ellipsis")
    done, total = campaign.get("done", 0), campaign.get("total", 0)
    second = Text()
    progress = phase.get("progress")
    if isinstance(progress, int | float):
        second.append(bar(float(progress), min(24, width // 3)), style="cyan")
        second.append(f" {100 * min(max(progress, 0.0), 1.0):3.0f} %")
    if phase.get("left_s") is not None:
        second.append(f"  phase {left_words(phase['left_s'])} left", style="default")
    if total:
        second.append(f"  points {done}/{total}", style="bold")
    if campaign.get("left_s") is not None:
        second.append(f"  run {left_words(campaign['left_s'])} left")
    return Group(text, step, second)


def bar(progress: float, width: int) -> str:
    """A bar of ``width`` columns in eighths.

    >>> bar(0.5, 4)
    '██░░'
    """
    eighths = round(min(max(progress, 0.0), 1.0) * width * 8)
    full, rest = divmod(eighths, 8)
    part = " ▏▎▍▌▋▊▉"[rest] if rest else ""
    return "█" * full + part + "░" * (width - full - len(part))


def left_words(seconds: Any) -> str:
    """A time that is left: ``1 h 05``, ``12 min``, ``40 s``.

    >>> left_words(3900), left_words(725), left_words(40), left_words(None)
    ('1 h 05', '12 min', '40 s', '–')
    """
    if not isinstance(seconds, int | float) or seconds != seconds or seconds < 0:
        return "–"
    if seconds >= 3600:
        return f"{int(seconds // 3600)} h {int(seconds % 3600 // 60):02d}"
    return f"{int(seconds // 60)} min" if seconds >= 90 else f"{int(seconds)} s"


def clock_words(seconds: Any) -> str:
    """Process time as h:mm:ss."""
    if not isinstance(seconds, int | float):
        return ""
    whole = int(seconds)
    return f"{whole // 3600}:{whole % 3600 // 60:02d}:{whole % 60:02d}"


def _values(values: Mapping[str, Any], rig: RigDefinition | None, width: int, most: int) -> Table:
    """Tags in columns, by what they measure, in ``most`` rows if that can be; bad ones say why and always stay."""
    columns = max(1, width // 27)
    shown = _ordered(values, rig)
    for ending in DRAWN:
        if len(shown) > most * columns:
            shown = [one for one in shown if not one[0].endswith(ending) or _mapping(one[1]).get("q") == "bad"]
    cells = [_value_cell(tag, _mapping(entry), measures) for tag, entry, measures in shown]
    table = Table.grid(padding=(0, 1), expand=True)
    for _ in range(columns):
        table.add_column(ratio=1, no_wrap=True, overflow="ellipsis")
    height = -(-len(cells) // columns)
    for row in range(height):
        picked = [cells[row + height * column] for column in range(columns) if row + height * column < len(cells)]
        table.add_row(*picked)
    return table


def _ordered(values: Mapping[str, Any], rig: RigDefinition | None) -> list[tuple[str, Any, str]]:
    known = {tag.id: tag for tag in rig.tags} if rig else {}
    listed = []
    for name, entry in values.items():
        tag = known.get(name)
        measures = tag.measures if tag else ""
        if name.endswith((".level", ".standby", ".delivered", ".setpoint")):
            continue
        listed.append((GROUPS.index(measures) if measures in GROUPS else len(GROUPS), name, entry, measures))
    return [(name, entry, measures) for _, name, entry, measures in sorted(listed, key=lambda item: item[:2])]


def _value_cell(tag: str, entry: Mapping[str, Any], measures: str) -> Text:
    style = {"bad": "bold red", "uncertain": "yellow"}.get(str(entry.get("q")), "default")
    shown = quantity(entry, measures)
    if entry.get("q") == "bad" and shown != "–":
        shown = f"✗ {shown}"
    return Text.assemble((f"{tag} ", "dim"), (shown, style))


def _attention(snapshot: Mapping[str, Any]) -> list[RenderableType]:
    """Tripped interlocks, standing alarms, devices that do not answer, prompts that wait."""
    found: list[RenderableType] = []
    locks = _mapping(snapshot.get("interlocks"))
    tripped = [name for name, lock in locks.items() if str(lock).startswith("tripped")]
    bypassed = [name for name, lock in locks.items() if lock == "bypassed"]
    if tripped and len(tripped) < len(locks):
        found.append(Text(f"tripped: {', '.join(tripped)}", style="bold red"))
    elif tripped:
        found.append(Text("not yet reset: nothing may move (rigd reset)", style="yellow"))
    if bypassed:
        found.append(Text(f"BYPASSED: {', '.join(bypassed)}", style="bold magenta"))
    for alarm in sorted(_list(snapshot.get("alarms")), key=lambda one: one.get("priority", 9)):
        if alarm.get("hidden"):
            found.append(Text(f"{alarm.get('id', '')} is {alarm.get('state', '')}", style="magenta"))
            continue
        style = PRIORITY_STYLES.get(alarm.get("priority", 4), "yellow")
        what = str(alarm.get("text") or alarm.get("title") or "")
        found.append(
            Text.assemble((f"{alarm.get('id', '')} ", style), (what, "default"), (f"  {alarm.get('do', '')}", "dim"))
        )
    for name, device in _mapping(snapshot.get("devices")).items():
        link = str(_mapping(device).get("link", ""))
        if link not in ("online", ""):
            found.append(Text(f"{name}: {link} {_mapping(device).get('detail', '')}".rstrip(), style="red"))
    for prompt in _list(snapshot.get("prompts")):
        found.append(Text.assemble(("waits for you: ", "bold magenta"), str(prompt.get("text", "")),
                                   (f"   rigd confirm {prompt.get('id', '')}", "dim")))  # fmt: skip
    return [Rule(style="dim"), *found] if found else []


def _events(events: Sequence[Told], most: int) -> Iterable[Text]:
    for event in events[-most:]:
        style = EVENT_STYLES.get(event.kind, "default")
        line = Text.assemble((f"{clock_words(event.t_s):>8} ", "dim"), (event.text or event.subject, style))
        line.no_wrap, line.overflow = True, "ellipsis"
        yield line


def _mapping(thing: Any) -> Mapping[str, Any]:
    return thing if isinstance(thing, Mapping) else {}


def _list(thing: Any) -> list[Mapping[str, Any]]:
    return [one for one in thing if isinstance(one, Mapping)] if isinstance(thing, list | tuple) else []
