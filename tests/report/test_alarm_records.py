"""The record of an alarm: every field of the project's list, from a real rehearsal with a clog, and hidden ones too."""

from __future__ import annotations

import json
from pathlib import Path

from fakes.recorded import BLOCK, recorded
from fakes.rehearsal import Rehearsal
from fakes.rigs import program_of

from rigd.adapters.alert_log import AlertLog, attempts_of
from rigd.model.events import EventKind
from rigd.model.orders import Verb
from rigd.report.alarm_load import alarm_load
from rigd.report.alarm_records import alarm_records, record_facts
from rigd.report.collect import read_run

ALWAYS = (
    "alarm", "type", "priority", "before", "after", "event", "told", "tag", "value", "unit", "quality", "limit",
    "deadband", "on_delay_s", "off_delay_s", "step",
)  # fmt: skip


def test_a_recorded_alarm_has_every_field() -> None:
    run = read_run(recorded(BLOCK))
    records = [record for record in alarm_records(run) if record.alarm == "PRESSURE-RISING"]
    assert records
    first = records[0]
    assert [name for name in ALWAYS if not getattr(first, name)] == []
    assert (first.before, first.after, first.event, first.told) == ("normal", "unacknowledged", "COND_ON", "new")
    assert (first.tag, first.unit, first.limit, first.deadband) == ("PT-1", "bar", "6.5", "0.4")
    assert float(first.value) > 6.5
    assert set(run.walls) == {event.t_ns for event in run.events if event.kind is EventKind.ALARM}
    facts = record_facts(run)
    assert facts["rig_digest"]
    assert facts["run"]


def test_one_that_comes_while_it_is_shelved_is_recorded_with_what_stands_behind_and_counted() -> None:
    run = Rehearsal(program_of())
    run.ready()
    run.ask(Verb.SHELVE, "PRESSURE-RISING", reason="known", duration_s=600.0)
    run.sensors["PT-1"] = 7.0
    run.run(5.0)
    events = run.happened(EventKind.ALARM)
    load = alarm_load(events, 60.0)
    assert (load.told, load.hidden, load.unheard) == (0, 1, 1)


def test_attempts_are_counted_by_channel_and_a_torn_line_is_left_out(tmp_path: Path) -> None:
    log = AlertLog(tmp_path)
    log.attempt("1", "phone", "hot", taken=False)
    log.attempt("1", "phone", "hot", taken=True)
    path = tmp_path / "alerts.jsonl"
    path.write_text(path.read_text(encoding="utf-8") + '{"utc": "2026', encoding="utf-8")
    assert [one["outcome"] for one in attempts_of(tmp_path)] == ["not taken", "taken"]
    assert attempts_of(tmp_path / "nowhere") == ()


def test_facts_are_json() -> None:
    assert json.loads(json.dumps(record_facts(read_run(recorded(BLOCK)))))["records"]
