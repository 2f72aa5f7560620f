"""Names that must be given once only."""

from __future__ import annotations

from collections.abc import Iterable

from rigd.config.checks.context import PART_SECTIONS, RigContext
from rigd.config.findings import Findings
from rigd.config.lines import Path, line_at

_SPACES = (
    ("part", "id", (*PART_SECTIONS, "lines")),
    ("liquid", "id", ("liquids",)),
    ("tag", "tag", ("sensors",)),
    ("rule", "id", ("interlocks", "alarms")),
    ("link", "id", ("links",)),
    ("device", "id", ("devices",)),
)
"""Names are unique within a space: parts and lines share one, interlocks and alarms another (requests name them)."""


def check_identity(context: RigContext) -> None:
    """Duplicate ids and tags; ids of rules that the rig makes by itself."""
    for what, key, sections in _SPACES:
        report_duplicates(context.found, what, _named(context, key, sections))
    made = {rule.id for rule in context.rig.interlocks if rule.built_in}
    made |= {f"EMPTY-{pump.id}" for pump in context.rig.pumps}
    for name, path in _named(context, "id", ("interlocks", "alarms")):
        if name in made:
            message = f"{name!r} is the id of a rule that every rig of this kind has by itself"
            context.found.error("duplicate-id", path, message, "give this rule another id")


def _named(context: RigContext, key: str, sections: Iterable[str]) -> Iterable[tuple[str, Path]]:
    source = context.found.source
    for section in sections:
        rows = source.data.get(section)
        for index, row in enumerate(rows if isinstance(rows, list) else []):
            name = row.get(key) if isinstance(row, dict) else None
            if isinstance(name, str):
                yield name, (section, index, key)


def report_duplicates(found: Findings, what: str, named: Iterable[tuple[str, Path]]) -> None:
    """A finding for every name after its first use; it says where the first one is."""
    first: dict[str, Path] = {}
    for name, path in named:
        if name in first:
            line = line_at(found.source.lines, first[name])
            message = f"{what} {name!r} is there already, in line {line}"
            found.error(
                f"duplicate-{'tag' if what == 'tag' else 'id'}", path, message, f"give this {what} another name"
            )
        first.setdefault(name, path)
