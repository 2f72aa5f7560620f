"""What must be true before a start is granted."""

from __future__ import annotations

from collections.abc import Mapping

from rigd.logic.conduct.layout import Layout
from rigd.logic.conduct.wants import Prompt
from rigd.logic.view import View
from rigd.model.devices import VALVE_LOST
from rigd.model.samples import Quality


def never_startable(layout: Layout) -> str:
    """Why this run can never be started as it is, "" when it can."""
    recipe = layout.recipe
    if recipe.sheet is None and not recipe.solvent_only:
        return "the recipe has no chemistry sheet, so only solvent may run"
    if layout.program.options.unattended and recipe.permit is None:
        return "an unattended run needs a permit in the recipe"
    return ""


def not_ready(layout: Layout, view: View, prompts: Mapping[str, Prompt]) -> list[str]:
    """Everything that stands in the way of a start now; an empty list grants it."""
    never = never_startable(layout)
    found = [never] if never else []
    if not view.verdict.permit:
        found.append("an interlock is tripped or was not reset")
    if view.verdict.hidden_alarm and layout.program.options.unattended:
        found.append(f"alarm {view.verdict.hidden_alarm} is hidden, and nobody will be there")
    if view.verdict.hold_wanted:
        found.append(f"{view.verdict.hold_wanted} asks for a hold")
    offline = [device.id for device in layout.rig.devices if not view.online(device.id)]
    if offline:
        found.append(f"not online: {', '.join(offline)}")
    unknown = _not_good(layout, view)
    if unknown:
        found.append(f"no good value: {', '.join(unknown)}")
    lost = [valve.id for valve in layout.rig.valves if view.value(f"{valve.id}.position") == VALVE_LOST]
    if lost:
        found.append(f"position lost: {', '.join(lost)}")
    unsigned = [prompt.id for prompt in prompts.values() if prompt.status == "open"]
    if unsigned:
        found.append(f"not confirmed: {', '.join(unsigned)}")
    return found


def _not_good(layout: Layout, view: View) -> list[str]:
    """Tags that the sequence steers by: pump counters and levels, valve positions, jacket, pressures."""
    needed = [play.tag(channel) for play in layout.pumps.values() for channel in ("level", "delivered", "state")]
    needed += [f"{valve.id}.position" for valve in layout.rig.valves if valve.device]
    needed += [layout.jacket, *layout.pressures]
    return [tag for tag in needed if tag in layout.program.tags and not _good(view, tag)]


def _good(view: View, tag: str) -> bool:
    sample = view.samples.get(tag)
    return sample is not None and sample.quality is not Quality.BAD
