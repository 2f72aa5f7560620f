"""Alarm statistics of a run, against cases counted by hand."""

from __future__ import annotations

import pytest

from rigd.model.events import Event, EventKind
from rigd.report.alarm_load import AlarmLoad, alarm_load

S = 1_000_000_000


def happened(*moments: tuple[float, str, str], priority: int = 2) -> list[Event]:
    """(time [s], alarm, event); COND_ON is told, REALARM told again."""
    told = {"COND_ON": "new", "REALARM": "again", "ACK": "off"}
    return [
        Event(
            EventKind.ALARM,
            name,
            round(at_s * S),
            "x",
            {"event": what, "announce": told.get(what, "-"), "priority": priority},
        )
        for at_s, name, what in moments
    ]


def test_nothing_happened() -> None:
    assert alarm_load([], 3600.0) == AlarmLoad(0, 0.0, 0, 0.0, {}, (), (), (), (), (), 0)


def test_counts_and_priorities() -> None:
    events = happened((10, "A", "COND_ON"), (20, "A", "ACK"), (300, "A", "COND_OFF"), (400, "A", "COND_ON"))
    events += happened((500, "B", "COND_ON"), (600, "B", "REALARM"), (700, "B", "COND_OFF"), priority=3)
    load = alarm_load(events, 7200.0)
    assert (load.told, load.per_hour, load.busiest) == (4, 2.0, 4)
    assert load.by_priority == {"high": 2, "medium": 2}
    assert load.most_frequent == (("A", 2), ("B", 2))
    assert load.standing == ("A",)
    assert load.words == "4 told, at most 4 in ten minutes; still there: A"


@pytest.mark.parametrize(("gap_s", "chatters"), [(29.0, True), (31.0, False)])
def test_three_in_a_minute_chatter(gap_s: float, chatters: bool) -> None:
    moments = [(gap_s * n + off, "A", what) for n in range(3) for off, what in ((0.0, "COND_ON"), (10.0, "COND_OFF"))]
    assert alarm_load(happened(*moments), 3600.0).chattering == (("A",) if chatters else ())


@pytest.mark.parametrize(("lasts_s", "seen", "fleeting"), [(5.0, False, True), (5.0, True, False), (5.1, False, False)])
def test_one_that_goes_by_itself_within_seconds_is_fleeting(lasts_s: float, seen: bool, fleeting: bool) -> None:
    moments = [(10.0, "A", "COND_ON"), *([(12.0, "A", "ACK")] if seen else []), (10.0 + lasts_s, "A", "COND_OFF")]
    assert alarm_load(happened(*moments), 3600.0).fleeting == (("A",) if fleeting else ())


def test_one_that_stands_for_more_than_a_day_is_stale() -> None:
    day_s = 86_400.0
    assert alarm_load(happened((0, "A", "COND_ON"), (day_s, "A", "COND_OFF")), 2 * day_s).stale == ()
    assert alarm_load(happened((0, "A", "COND_ON")), day_s + 1).stale == ("A",)


def test_a_flood_begins_above_ten_and_ends_below_five_in_ten_minutes() -> None:
    ten = [(60.0 * n, f"A{n}", "COND_ON") for n in range(10)]  # 0 to 540 s
    assert alarm_load(happened(*ten), 7200.0).flood_s == 0.0
    eleven = [*ten, (550.0, "A10", "COND_ON")]
    load = alarm_load(happened(*eleven), 7200.0)
    assert load.busiest == 11
    # begins with the eleventh at 550 s; at 600 + 360 s those of 0 to 360 s (seven) have left, four are within
    assert load.flood_s == pytest.approx(960.0 - 550.0)
    assert "in flood for 7 min" in load.words
    assert alarm_load(happened(*eleven), 700.0).flood_s == pytest.approx(150.0)


def test_what_was_hidden_is_counted() -> None:
    assert alarm_load(happened((1, "A", "SHELVE"), (2, "B", "REMOVE"), (3, "A", "UNSHELVE")), 10.0).hidden == 2


def test_a_nuisance_chatters_is_fleeting_or_stale_and_ten_alarms_have_their_share() -> None:
    events = happened(*((float(600 * n), f"A{n:02}", "COND_ON") for n in range(20)), *[(20_000.0, "A00", "COND_ON")])
    load = alarm_load(events, 30_000.0)
    assert load.share_of_ten == pytest.approx(11 / 21)
    assert load.nuisance == ()
    short = alarm_load(happened((10.0, "A", "COND_ON"), (12.0, "A", "COND_OFF")), 100.0)
    assert short.nuisance == ("A",)
