"""Reference spectra that a recipe asks for: is there a cell to record them, a time, a liquid of that name?"""

from __future__ import annotations

from rigd.config.checks.recipe import RecipeContext
from rigd.config.findings import listed, nearest


def check_references(context: RecipeContext) -> None:
    """Of [references] and the checklist items that name a liquid."""
    file, found = context.file, context.found
    if file.references is not None:
        if not any(cell.device for cell in context.rig.cells):
            message = "the rig has no cell with a device, so there are no spectra"
            found.error("references-no-cell", ("references",), message, "remove [references], or describe the cell")
        if file.conditioning is None:
            message = "the solvent's reference is taken at the end of [conditioning], which this recipe does not have"
            found.error("references-no-time", ("references",), message, "add [conditioning], or remove [references]")
    liquids = [liquid.id for liquid in context.rig.liquids]
    for item in file.checklist:
        key = (*item.key_path, "reference")
        if item.reference and item.reference not in liquids:
            message = f"no liquid {item.reference!r}{nearest(item.reference, liquids)}"
            found.error("reference-unknown", key, message, f"liquids of the rig: {listed(liquids)}")
        if item.reference and file.references is None:
            message = "a reference is asked for, but not how many spectra are averaged"
            found.error("reference-unasked", key, message, "add [references] with spectra = 6, or remove this key")
