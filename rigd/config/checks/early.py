"""Does the rig have what the limits of its early rules are about?"""

from __future__ import annotations

from rigd.config.checks.context import RigContext

_NEEDS = {
    "resistance_up": ("resistance", "a pressure sensor on the way of the liquid"),
    "resistance_down": ("resistance", "a pressure sensor on the way of the liquid"),
    "time_left": ("time-left", "a pressure sensor with an interlock above a limit"),
    "compliance_up": ("compliance", "a pressure sensor, and an outlet valve that can be shut"),
    "compliance_down": ("compliance", "a pressure sensor, and an outlet valve that can be shut"),
    "balance": ("balance", "a flow sensor on the way of the liquid, or a level or balance at a vessel"),
    "heat": ("unexplained", "a temperature inside a column"),
}


def check_early(context: RigContext) -> None:
    """A limit that is written but has nothing to look at."""
    there = {tag.id.rpartition(".")[2] for tag in context.rig.tags}
    for key in sorted(context.file.early.model_fields_set):
        name, need = _NEEDS[key]
        if name not in there and context.whole("sensors", "interlocks"):
            message = f"{key} has nothing to look at in this rig"
            context.found.warning("early-unused", ("early", key), message, f"remove it, or add {need}")
