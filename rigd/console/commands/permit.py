"""``rigd permit``, ``rigd proof``, ``rigd alert-test``: what an unattended run needs, and the record of it."""

from __future__ import annotations

import asyncio
import getpass
import secrets
from datetime import UTC, datetime
from pathlib import Path
from typing import TYPE_CHECKING

import click

from rigd.console.output import Output, json_option

if TYPE_CHECKING:
    from rigd.config.arming import Arming
    from rigd.model.records import RigRecord
    from rigd.report.papers import Paper

SIGN, CARD = "door-sign.html", "shutdown-card.html"
CODE_MAX = 10_000


@click.command()
@click.argument("rig", type=click.Path(path_type=Path))
@click.argument("recipe", type=click.Path(path_type=Path))
@click.option("--out", type=click.Path(path_type=Path, file_okay=False), help="Write sign and card there, to print.")
@json_option
@click.pass_obj
def permit(output: Output, rig: Path, recipe: Path, out: Path | None) -> int:
    """May RIG run RECIPE with nobody there? Shows the sign for the door and the shutdown card too.

    Exit 0: it may. 1: something is missing.
    """
    from rigd.config.load import load_pair
    from rigd.report.papers import door_sign, page, shutdown_card
    from rigd.runtime.arming import arming_of, is_simulated

    pair = load_pair(rig, recipe)
    assert pair.recipe is not None
    found = arming_of(rig, pair.rig, pair.recipe)
    simulated = is_simulated(pair.rig)
    papers = {SIGN: door_sign(pair.rig, pair.recipe, simulated=simulated),
              CARD: shutdown_card(pair.rig, pair.recipe, simulated=simulated)}  # fmt: skip
    if out is not None:
        out.mkdir(parents=True, exist_ok=True)
        for name, paper in papers.items():
            (out / name).write_text(page(paper), encoding="utf-8")
    output.document(_facts(found, papers, out))
    _show(output, found)
    for paper in papers.values():
        output.say(_panel(paper))
    if out is not None:
        output.say(f"to print: {out / SIGN} and {out / CARD}")
    return 0 if found.armed else 1


def _facts(found: Arming, papers: dict[str, Paper], out: Path | None) -> dict[str, object]:
    from dataclasses import asdict

    return {
        "armed": found.armed,
        "requirements": [asdict(one) for one in found.requirements],
        "papers": {name: asdict(paper) for name, paper in papers.items()},
        "written": [str(out / name) for name in papers] if out else [],
    }


def _show(output: Output, found: Arming) -> None:
    from rich import box
    from rich.markup import escape
    from rich.table import Table

    table = Table(box=box.SIMPLE_HEAD, pad_edge=False)
    for heading in ("", "for an unattended run", "found", "do"):
        table.add_column(heading, overflow="fold")
    for one in found.requirements:
        mark = "[green]met[/]" if one.met else "[yellow]waived[/]" if one.waived else "[bold red]missing[/]"
        told = f"{one.found} ({one.waived})" if one.waived and not one.met else one.found
        table.add_row(mark, one.title, escape(told), "" if one.met else escape(one.remedy))
    output.say(table)
    output.say("[green]may run unattended[/]" if found.armed else "[bold red]may not run unattended[/]")


def _panel(paper: Paper) -> object:
    from rich.console import Group
    from rich.panel import Panel
    from rich.table import Table
    from rich.text import Text

    grid = Table.grid(padding=(0, 2))
    grid.add_column(style="bold", no_wrap=True)
    grid.add_column(overflow="fold")
    for title, lines in paper.parts:
        grid.add_row(title, Text("\n".join(lines)))
    steps = [Text(f"{number}  {step}", style="bold") for number, step in enumerate(paper.steps, 1)]
    return Panel(Group(*steps, *([Text()] if steps else []), grid), title=f"{paper.heading}: {paper.title}")


@click.command()
@click.argument("rig", type=click.Path(path_type=Path))
@click.argument("interlock", required=False)
@click.option("--as", "who", default="", metavar="NAME", help="Who tested; default: your login.")
@click.option("--as-found", default="", help="What was given and what came of it: stimulus to final element. Needed.")
@click.option("--as-left", default="", help="In what state it was left. Needed.")
@click.option("--failed", is_flag=True, help="It did not do what it should.")
@json_option
@click.pass_obj
def proof(output: Output, rig: Path, interlock: str | None, who: str, as_found: str, as_left: str, failed: bool) -> int:
    """Record the proof test of INTERLOCK of RIG; without INTERLOCK, list when each was tested last.

    Exit 0: recorded, or all in date. 1: one is overdue.
    """
    from rigd.adapters.rig_records import append_record, read_records
    from rigd.config.arming import overdue_interlocks
    from rigd.config.load import load_rig
    from rigd.model.records import RecordKind, RigRecord

    definition = load_rig(rig)
    tested = [lock.id for lock in definition.interlocks if not lock.built_in]
    if interlock is None:
        overdue = dict(overdue_interlocks(definition, read_records(rig), datetime.now(UTC)))
        last = {one.subject: one for one in read_records(rig) if one.kind is RecordKind.PROOF}
        output.document({"overdue": list(overdue), "last": {name: _entry(last.get(name)) for name in tested}})
        for name in tested:
            mark = "[bold red]overdue[/]" if name in overdue else "[green]in date[/]"
            output.say(f"{mark}  {name}: {_words(last.get(name))}")
        return 1 if overdue else 0
    if interlock not in tested:
        raise click.UsageError(f"{rig} declares no interlock {interlock!r}; it has {', '.join(tested) or 'none'}")
    if not as_found.strip() or not as_left.strip():
        raise click.UsageError('a proof test needs --as-found and --as-left, e.g. --as-found "8.1 bar by hand pump, '
                               'pumps stopped after 0.4 s" --as-left "vented, 0 bar"')  # fmt: skip
    now = datetime.now(UTC).isoformat(timespec="seconds")
    who = who or getpass.getuser()
    record = RigRecord(RecordKind.PROOF, interlock, now, who, not failed, as_found.strip(), as_left.strip())
    path = append_record(rig, record)
    output.document({"recorded": _entry(record), "file": str(path)})
    output.say(f"recorded in {path}: {interlock} {_words(record)}")
    return 0


def _entry(record: RigRecord | None) -> dict[str, object] | None:
    from dataclasses import asdict

    return None if record is None else asdict(record)


def _words(record: RigRecord | None) -> str:
    if record is None:
        return "never tested"
    passed = "passed" if record.passed else "FAILED"
    return f"{passed} {record.utc} by {record.who}; found: {record.as_found}; left: {record.as_left}"


@click.command("alert-test")
@click.argument("rig", type=click.Path(path_type=Path))
@click.option("--received", "code", default="", metavar="CODE", help="The code that somebody read in a test alert.")
@click.option("--as", "who", default="", metavar="NAME", help="Who received it; needed with --received.")
@json_option
@click.pass_obj
def alert_test(output: Output, rig: Path, code: str, who: str) -> int:
    """Send a test alert with a code over each alert channel of RIG; then record with --received that it was read."""
    from rigd.adapters.alert_channels import AppriseSender
    from rigd.adapters.rig_records import append_record, read_records
    from rigd.config.load import load_rig
    from rigd.model.records import RecordKind, RigRecord

    definition = load_rig(rig)
    now = datetime.now(UTC).isoformat(timespec="seconds")
    if code:
        if not who.strip():
            raise click.UsageError("--received needs --as NAME: the person who read the code")
        sent = [one for one in read_records(rig) if one.kind is RecordKind.ALERT_SENT]
        name = next((one.subject for one in reversed(sent) if one.detail == code.strip()), "")
        if not name:
            raise click.UsageError(
                f"no test alert with the code {code!r} was sent; send one with: rigd alert-test {rig}"
            )
        append_record(rig, RigRecord(RecordKind.ALERT_RECEIVED, name, now, who.strip(), detail=code.strip()))
        output.document({"received": name, "who": who.strip()})
        output.say(f"recorded: {who.strip()} was reached over {name}")
        return 0
    if not definition.outside.channels:
        raise click.UsageError(f"{rig} names no alert channel; add an [[outside.alerts]] table")
    taken = {}
    for channel in definition.outside.channels:
        number = f"{secrets.randbelow(CODE_MAX):04d}"
        text = f"Test alert. Tell whoever sent it this code: {number}"
        taken[channel.name] = asyncio.run(AppriseSender(channel).send(f"{definition.name}: TEST", text, urgent=True))
        if taken[channel.name]:
            append_record(rig, RigRecord(RecordKind.ALERT_SENT, channel.name, now, getpass.getuser(), detail=number))
        done = "[green]taken[/]" if taken[channel.name] else "[bold red]not taken[/]"
        output.say(f"{done} by {channel.name}")
    output.document({"taken": taken})
    output.say("when somebody tells you the code: rigd alert-test RIG --received CODE --as NAME")
    return 0 if all(taken.values()) else 1
