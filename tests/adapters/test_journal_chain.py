"""The chain of hashes: check values, what verification finds, and what it must not take for tampering."""

from __future__ import annotations

import hashlib
import json
import math
import random
import shutil
import sqlite3
import time
from pathlib import Path

import pytest
from fakes.journal_rows import TAGS, UTC, S, decisions, filled, rich_intake
from hypothesis import example, given, settings
from hypothesis import strategies as st

from rigd.adapters import journal_schema as schema
from rigd.adapters.journal_chain import COLUMNS, START, encoded, linked
from rigd.adapters.journal_sqlite import SqliteJournal
from rigd.adapters.journal_verify import Finding, verify
from rigd.model.errors import JournalError
from rigd.model.events import Event, EventKind
from rigd.model.intake import Intake
from rigd.model.samples import Quality, QualityCause, Sample


def test_check_values() -> None:
    """Values computed beside this project's references (H(n) = SHA-256(H(n-1) || record), H(0) = 32 zero bytes), and
    the first bytes of SHA-256("abc") in FIPS 180-4."""
    assert hashlib.sha256(b"abc").hexdigest().startswith("ba7816bf8f01cfea")
    head, found = START, []
    for number in (1, 2, 3):
        head = linked(head, b'{"n":%d}' % number)
        found.append(head.hex())
    assert found == [
        "29cecc91e68d3dffede939118bf4bbc6d970cf01aa0b9e6bde45692fabfdf661",
        "343a24f5f805e0108039a562689b9d62b4be6072e783e4555b1eb109d4f92963",
        "0777ead15def22054163c66038f45b2ee3d7c1d0711d791a87b2811025e2b349",
    ]


@pytest.fixture(scope="module")
def recorded(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A journal of several transactions, closed."""
    path = tmp_path_factory.mktemp("chain") / "run.sqlite"
    write(path)
    return path


def write(path: Path, scans: int = 30, close: bool = True) -> SqliteJournal:
    """Each scan in a transaction of its own, as in a run at its own pace."""
    journal = SqliteJournal(path, {"run": "r1", "boot_id": "b1", "version": "v", "origin_monotonic_ns": "1000"}, TAGS)
    for number in range(1, scans + 1):
        journal.scan(number, number * S, UTC, rich_intake(number))
        journal.decided(number, *decisions(number))
        if number % 5 == 0:
            settled(journal, number)
    if close:
        journal.close("done")
    return journal


def settled(journal: SqliteJournal, trips: int) -> None:
    """Wait until so many trips, one record each, and their seal are in the file."""
    deadline_s = time.monotonic() + 10.0
    while journal.head()[0] < trips + 2 and time.monotonic() < deadline_s:
        time.sleep(0.001)
    time.sleep(0.02)


@pytest.fixture
def copy(recorded: Path, tmp_path: Path) -> Path:
    """A copy to spoil."""
    return Path(shutil.copy(recorded, tmp_path / "run.sqlite"))


def test_a_whole_record_is_intact_and_its_head_is_the_writers(tmp_path: Path) -> None:
    journal = write(tmp_path / "run.sqlite")
    found = verify(tmp_path)
    assert (found.finding, found.outcome, found.words) == (Finding.INTACT, "done", "")
    assert (found.records, found.head) == journal.head()
    assert found.rows == 30 * (1 + 3 + 4 + 1 + 1)


def test_who_did_what_stands_in_the_trail_with_both_clocks(tmp_path: Path) -> None:
    journal = SqliteJournal(
        tmp_path / "run.sqlite", {"run": "r1", "boot_id": "b1", "origin_monotonic_ns": "1000"}, TAGS
    )
    fields = {"request_id": "d1", "who": "ann", "target": "BED-HOT", "result": "refused", "detail": "no reason"}
    journal.scan(1, 5, UTC, Intake())
    phase = Event(EventKind.PHASE, "prime", 5, "Prime.", {})
    asked = Event(EventKind.REQUEST, "bypass", 5, "ann asked.", fields)
    journal.decided(1, [], [phase, asked])
    journal.close("stopped")
    with sqlite3.connect(tmp_path / "run.sqlite") as connection:
        bodies = [json.loads(body) for (body,) in connection.execute("SELECT body FROM audit ORDER BY seq")]
    assert [body["seq"] for body in bodies] == list(range(1, len(bodies) + 1))
    (deed,) = [body for body in bodies if body["kind"] == "audit"]
    wanted = {"actor": "ann", "action": "bypass", "object": "BED-HOT", "result": "refused", "reason": "no reason"}
    wanted |= {"step": "prime", "t_ns": 5, "mono_ns": 1005, "utc": UTC, "boot": "b1", "run": "r1"}
    assert {key: deed[key] for key in wanted} == wanted
    assert bodies[0]["kind"] == "begin"
    assert all({"utc", "mono_ns"} <= body.keys() for body in bodies)
    assert (bodies[-1]["kind"], bodies[-1]["outcome"]) == ("end", "stopped")


A_TRIP = """(SELECT seq FROM audit WHERE body LIKE '%"action":"trip"%' ORDER BY seq LIMIT 1 OFFSET 12)"""

CHANGES = {
    "a value of a sample": "UPDATE samples SET value = value + 0.001 WHERE rowid = 40",
    "the quality of a sample": "UPDATE samples SET quality = 0 WHERE rowid = 41",
    "the time of a scan": "UPDATE scans SET now_ns = now_ns + 1 WHERE number = 7",
    "the wall time of a scan": "UPDATE scans SET utc = '2026-03-04T05:06:08.000+00:00' WHERE number = 7",
    "a request": "UPDATE inputs SET body = replace(body, 'ann', 'bob') WHERE rowid = 11",
    "an order": "UPDATE orders SET value = value * 2 WHERE rowid = 9",
    "an event": "UPDATE events SET text = 'All was well.' WHERE rowid = 12",
    "a row dropped": "DELETE FROM events WHERE rowid = 12",
    "the last rows dropped": "DELETE FROM samples WHERE scan = 30",
    "a row added": "INSERT INTO events VALUES (30, 'note', 'x', 1, 'x', '{}')",
    "two rows exchanged": "UPDATE orders SET rowid = CASE rowid WHEN 9 THEN -9 ELSE rowid END WHERE rowid = 9",
    "a fact": "UPDATE meta SET value = 'nobody' WHERE key = 'run'",
    "a fact added": "INSERT INTO meta VALUES ('signer', 'ann')",
    "a fact dropped": "DELETE FROM meta WHERE key = 'boot_id'",
    "a tag": "UPDATE tags SET high = 250.0 WHERE id = 1",
    "a record of the trail": f"UPDATE audit SET body = replace(body, 'trip', 'Trip') WHERE seq = {A_TRIP}",
    "a record dropped": "DELETE FROM audit WHERE seq = 20",
    "the first record dropped": "DELETE FROM audit WHERE seq = 1",
    "all records dropped": "DELETE FROM audit",
    "the end dropped": "DELETE FROM audit WHERE seq = (SELECT max(seq) FROM audit)",
    "a value of another kind": "UPDATE tags SET labels = 7 WHERE id = 1",
}


@pytest.mark.parametrize("change", CHANGES)
def test_what_was_changed_is_found(copy: Path, change: str) -> None:
    with sqlite3.connect(copy) as connection:
        connection.execute(CHANGES[change])
    found = verify(copy)
    assert found.finding is Finding.TAMPERED
    assert found.words.startswith("run.sqlite: ")


def test_an_own_hash_made_to_fit_is_found_at_the_next_record(copy: Path) -> None:
    with sqlite3.connect(copy) as connection:
        seq, body = connection.execute(f"SELECT seq, body FROM audit WHERE seq = {A_TRIP}").fetchone()
        (previous,) = connection.execute("SELECT hash FROM audit WHERE seq = ?", (seq - 1,)).fetchone()
        body = body.replace("trip", "Trip")
        new = linked(bytes.fromhex(previous), body.encode()).hex()
        connection.execute("UPDATE audit SET body = ?, hash = ? WHERE seq = ?", (body, new, seq))
    found = verify(copy)
    assert found.finding is Finding.TAMPERED
    assert f"record {seq + 1}" in found.words


def test_any_flipped_byte_is_found_or_changes_nothing_that_is_sealed(copy: Path) -> None:
    """Bytes in free space and in tables that are not part of the chain may differ; a row that can be read may not."""
    whole = copy.read_bytes()
    reference = contents(copy)
    chance = random.Random(6)
    kinds = set()
    for _ in range(150):
        place = chance.randrange(len(whole))
        copy.write_bytes(whole[:place] + bytes([whole[place] ^ (1 << chance.randrange(8))]) + whole[place + 1 :])
        try:
            found = verify(copy).finding
        except JournalError:
            continue  # not even the list of tables can be read
        kinds.add(found)
        if found is Finding.INTACT:
            assert contents(copy) == reference
        assert found is not Finding.TORN
    assert Finding.TAMPERED in kinds


def contents(path: Path) -> list[object]:
    with sqlite3.connect(f"file:{path}?mode=ro", uri=True) as connection:
        tables = [*COLUMNS, "tags", "audit"]
        return [connection.execute(f"SELECT * FROM {table} ORDER BY rowid").fetchall() for table in tables]


@pytest.mark.parametrize("part", [0.97, 0.9, 0.6, 0.3])
def test_a_file_that_is_cut_short_is_damaged_and_not_tampered(copy: Path, part: float) -> None:
    whole = copy.read_bytes()
    copy.write_bytes(whole[: int(len(whole) * part)])
    found = verify(copy)
    assert found.finding is Finding.DAMAGED
    assert "bytes are missing at its end" in found.words


def test_a_run_that_died_is_torn_and_all_before_is_true(tmp_path: Path) -> None:
    journal = write(tmp_path / "run.sqlite", close=False)
    settled(journal, 30)
    for name in ("run.sqlite", "run.sqlite-wal"):
        (tmp_path / "died").mkdir(exist_ok=True)
        shutil.copy(tmp_path / name, tmp_path / "died" / name)
    found = verify(tmp_path / "died")
    assert found.finding is Finding.TORN
    assert found.records > 30
    journal.close("done")
    assert verify(tmp_path).finding is Finding.INTACT


def test_a_torn_write_ahead_log_loses_its_last_transactions_and_is_not_tampering(tmp_path: Path) -> None:
    journal = write(tmp_path / "run.sqlite", close=False)
    settled(journal, 30)
    died = tmp_path / "died"
    died.mkdir()
    shutil.copy(tmp_path / "run.sqlite", died)
    log = (tmp_path / "run.sqlite-wal").read_bytes()
    journal.close("done")
    for cut in (1, 700, 5000, 20000):
        (died / "run.sqlite-wal").write_bytes(log[:-cut])
        assert verify(died).finding is Finding.TORN


def test_a_head_that_left_with_an_alert_tells_a_cut_tail_and_a_new_record(tmp_path: Path) -> None:
    journal = write(tmp_path / "run.sqlite", close=False)
    _, head = journal.head()
    journal.close("done")
    assert verify(tmp_path, head).anchor is True
    assert verify(tmp_path, head.upper()).anchor is True
    assert verify(tmp_path, "00" * 32).anchor is False
    other = tmp_path / "other"
    other.mkdir()
    write(other / "run.sqlite", scans=31)
    assert verify(other).finding is Finding.INTACT
    assert verify(other, verify(tmp_path).head).anchor is False
    assert verify(tmp_path).anchor is None


def test_a_new_part_after_a_disk_that_failed_names_the_old_head(tmp_path: Path) -> None:
    bad = {"left": 0}

    class Failing(sqlite3.Connection):
        def execute(self, sql: str, *more: object) -> sqlite3.Cursor:  # type: ignore[override]
            if sql == "COMMIT" and bad["left"]:
                bad["left"] -= 1
                raise sqlite3.OperationalError("disk I/O error")
            return super().execute(sql, *more)  # type: ignore[arg-type]

    def failing(path: Path) -> sqlite3.Connection:
        connection = sqlite3.connect(path, isolation_level=None, check_same_thread=False, factory=Failing)
        connection.execute("PRAGMA journal_mode = WAL")
        return connection

    journal = SqliteJournal(tmp_path / "run.sqlite", {}, TAGS, failing)
    for number in range(1, 11):
        if number == 5:
            bad["left"] = 1
        journal.scan(number, number * S, UTC, rich_intake(number))
        journal.decided(number, *decisions(number))
        settled(journal, number)
        if number == 5:
            time.sleep(1.1)  # the writer tries again after a second
    journal.close("done")
    assert (tmp_path / "run.2.sqlite").is_file()
    found = verify(tmp_path)
    assert (found.finding, found.outcome) == (Finding.INTACT, "done")
    (tmp_path / "run.sqlite").unlink()
    shutil.copy(tmp_path / "run.2.sqlite", tmp_path / "run.sqlite")
    (tmp_path / "run.2.sqlite").unlink()
    assert verify(tmp_path).finding is Finding.TAMPERED


def test_a_journal_from_before_the_chain_says_so(copy: Path) -> None:
    with sqlite3.connect(copy) as connection:
        connection.execute("DROP TABLE audit")
    found = verify(copy)
    assert (found.finding, found.words) == (Finding.UNSEALED, "it was recorded without a chain of hashes")


def test_plain_scans_are_sealed_once_a_second_and_the_rest_of_a_torn_record_is_counted(tmp_path: Path) -> None:
    journal = SqliteJournal(tmp_path / "run.sqlite", {}, TAGS)
    for number in range(1, 101):
        journal.scan(number, number * S, UTC, Intake(samples=(Sample("PT-1", 1.0, number * S),)))
        journal.decided(number, [], [])
        time.sleep(0.002)
    time.sleep(0.1)
    died = tmp_path / "died"
    died.mkdir()
    for name in ("run.sqlite", "run.sqlite-wal"):
        shutil.copy(tmp_path / name, died / name)
    torn = verify(died)
    assert (torn.finding, torn.rows + torn.unsealed) == (Finding.TORN, 200)
    assert torn.unsealed > 100
    assert f"{torn.unsealed} rows after the last seal" in torn.words
    journal.close("done")
    found = verify(tmp_path)
    assert (found.finding, found.rows, found.unsealed) == (Finding.INTACT, 200, 0)
    assert found.records < 10


def test_no_journal(tmp_path: Path) -> None:
    with pytest.raises(JournalError, match="no journal"):
        verify(tmp_path)


def test_many_scans_in_one_transaction_are_sealed_as_well(tmp_path: Path) -> None:
    filled(tmp_path / "run.sqlite", 500)
    assert verify(tmp_path).finding is Finding.INTACT


SAMPLES = st.lists(
    st.builds(
        lambda value, quality, cause, raw, t_ns: Sample("PT-1", value, t_ns, quality, cause, raw),
        st.one_of(st.floats(), st.integers(-1000, 1000).map(float)),
        st.sampled_from(Quality),
        st.sampled_from(QualityCause),
        st.one_of(st.none(), st.integers(-(2**63) + 1, 2**63 - 1)),
        st.integers(0, 2**62),
    ),
    max_size=8,
)


@settings(max_examples=60, deadline=None)
@given(SAMPLES)
@example([Sample("PT-1", -0.0, 0), Sample("PT-1", math.nan, 0)])
def test_the_bytes_of_what_is_read_is_that_of_what_was_written(samples: list[Sample]) -> None:
    rows = schema.sample_rows(1, {"PT-1": 1}, samples)
    connection = sqlite3.connect(":memory:")
    connection.executescript(schema.TABLES)
    connection.executemany(schema.INSERT_SAMPLE, rows)
    read = connection.execute("SELECT * FROM samples ORDER BY rowid").fetchall()
    assert encoded("samples", read) == encoded("samples", rows)


def test_the_chain_covers_every_table_that_holds_the_record() -> None:
    connection = sqlite3.connect(":memory:")
    connection.executescript(schema.TABLES)
    tables = {name for (name,) in connection.execute("SELECT name FROM sqlite_master WHERE type = 'table'")}
    assert tables - set(COLUMNS) == {"meta", "tags", "audit", "minutes"}
    for table, kinds in COLUMNS.items():
        assert len(connection.execute(f"PRAGMA table_info({table})").fetchall()) == len(kinds)
