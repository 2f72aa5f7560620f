"""Each line fault does what its listing says, and ends."""

from __future__ import annotations

from collections.abc import Callable

import pytest
from fakes.emulated import Master, chiller_line, pump_line, request, valve_line
from hypothesis import given, settings
from hypothesis import strategies as st

from rigd.ports.plant import FaultKind, FaultSpec
from rigd_sim.emulators.line_faults import LINE_KINDS

ASK = request("11", "01", "status?")


def faulty(kind: str, target: str, magnitude: float = 1.0) -> Master:
    """A pump line with one fault in force."""
    master = pump_line()
    master.line.inject(FaultSpec(kind, target, 0.0, magnitude=magnitude))
    return master


def fresh(master: Master, words: str = "status?") -> bytes:
    """One exchange, raw."""
    return master.send(request("11", f"{int(master.now_s * 20) % 256:02X}", words))


def test_dead_line_carries_nothing_and_nobody_obeys() -> None:
    master = faulty("line-dead", "bus")
    assert fresh(master, "rate 1.0") == b""
    master.line.clear("line-dead", "bus")
    assert b"state=stopped" in fresh(master)


def test_loss_of_all_bytes_and_of_some() -> None:
    assert fresh(faulty("line-loss", "pump", 1.0)) == b""
    reply = pump_line().send(ASK)
    part = faulty("line-loss", "pump", 0.2).send(ASK)
    assert 0 < len(part) < len(reply)


def test_flipped_bits_keep_the_length() -> None:
    reply, flipped = pump_line().send(ASK), faulty("line-flip", "pump", 0.2).send(ASK)
    assert len(flipped) == len(reply)
    assert flipped != reply


def test_noise_comes_before_replies_and_between_them() -> None:
    master = faulty("line-noise", "bus", 7)
    assert len(master.send(ASK)) == 7 + len(pump_line().send(ASK))
    assert len(master.wait(30)) % 7 == 0
    assert master.wait(30)


def test_doubled_reply() -> None:
    assert faulty("line-double", "bus").send(ASK) == pump_line().send(ASK) * 2


def test_late_reply_is_whole_but_late() -> None:
    ((usual_s, reply),) = pump_line().line.feed(ASK, 0.0)
    ((delay_s, late),) = faulty("line-late", "pump", 0.7).line.feed(ASK, 0.0)
    assert late == reply
    assert delay_s == pytest.approx(usual_s + 0.7)


def test_reply_in_two_pieces() -> None:
    first, second = faulty("line-pieces", "pump", 0.2).line.feed(ASK, 0.0)
    assert first[1] + second[1] == pump_line().send(ASK)
    assert second[0] - first[0] == pytest.approx(0.2)


def test_swapped_replies_answer_the_request_before() -> None:
    master = faulty("line-swapped", "pump")
    assert master.send(request("11", "01", "bores?")) == b""
    assert master.send(request("11", "02", "who?")).startswith(b"(1101 ok n=2")
    assert master.send(request("11", "03", "status?")).startswith(b"(1102 ok bench")


def test_echo_gives_back_the_request_first() -> None:
    assert faulty("line-echo", "bus").send(ASK).startswith(ASK + b"(1101 ok ")


def test_silent_device_neither_answers_nor_obeys_not_even_its_time_out() -> None:
    master = pump_line()
    assert [master.ask("11", words) for words in ("silence 1", "rate 1.0")] == ["ok", "ok"]
    master.line.inject(FaultSpec("device-silent", "pump", 0.0))
    assert master.ask("11", "stop") == ""
    master.send(request("00", "01", "stop"))
    master.wait(3)
    assert master.plant.read("pump", ("state",))[0].value == 1


def test_mute_device_obeys() -> None:
    master = faulty("device-mute", "pump")
    assert fresh(master, "rate 1.0") == b""
    assert master.plant.read("pump", ("state",))[0].value == 1


def test_busy_device_and_a_protocol_without_that_word() -> None:
    assert b" busy)" in fresh(faulty("device-busy", "pump"))
    master = chiller_line()
    master.line.inject(FaultSpec("device-busy", "chiller"))
    assert master.plain("RUN") == "RUN 0"


def test_stuck_device_repeats_itself_but_obeys() -> None:
    master = pump_line()
    master.line.inject(FaultSpec("device-stuck", "pump"))
    before = master.ask("11", "status?")
    assert master.ask("11", "rate 1.0") == "ok"
    master.wait(5)
    assert master.ask("11", "status?") == before
    assert master.plant.read("pump", ("state",))[0].value == 1


def test_exchanged_device_has_another_serial_number() -> None:
    assert b"SIM-exchanged" in fresh(faulty("device-exchanged", "pump"), "who?")
    master = chiller_line()
    master.line.inject(FaultSpec("device-exchanged", "chiller"))
    assert master.plain("ID") == "CB-1 SIM-exchanged 1.0 SIMULATED"


def test_refusing_device() -> None:
    master = faulty("device-refuses", "pump")
    assert b" no fault)" in fresh(master, "rate 1.0")
    assert b" ok state=" in master.send(request("11", "EE", "status?"))
    chiller = chiller_line()
    chiller.line.inject(FaultSpec("device-refuses", "chiller"))
    assert [chiller.plain(words) for words in ("RUN 1", "SET 30.0", "RUN")] == ["ERR LEVEL", "ERR RANGE", "RUN 0"]


def test_pretending_device_says_ok_and_does_nothing_not_even_the_stop_for_all() -> None:
    master = pump_line()
    master.ask("11", "rate 1.0")
    master.line.inject(FaultSpec("device-pretends", "pump"))
    assert master.ask("11", "stop") == "ok"
    master.send(request("00", "01", "stop"))
    assert "state=delivering" in master.ask("11", "status?")


def test_reboot_moves_a_valve_to_its_rest() -> None:
    master = valve_line({"at": "2"})
    master.line.inject(FaultSpec("device-reboot", "valve", 1.0, magnitude=1.0))
    master.wait(4)
    assert master.ask("21", "at?") == "ok at=1"


def test_a_fault_begins_and_ends_in_process_time() -> None:
    master = pump_line()
    master.line.inject(FaultSpec("device-silent", "pump", onset_s=1.0, duration_s=2.0))
    answers = []
    for _ in range(4):
        answers.append(bool(master.ask("11", "status?")))
        master.wait(1.0)
    assert answers == [True, False, False, True]


@pytest.mark.parametrize("kind", LINE_KINDS, ids=lambda kind: kind.kind)
@given(st.floats(-2, 600) | st.sampled_from([float("inf")]), st.lists(st.binary(max_size=30), max_size=4))
@settings(max_examples=15, deadline=None)
def test_any_magnitude_and_any_bytes_under_a_fault_do_not_crash(
    kind: FaultKind, magnitude: float, chunks: list[bytes]
) -> None:
    makers: tuple[tuple[Callable[[], Master], str], ...] = ((pump_line, "pump"), (chiller_line, "chiller"))
    for make, device in makers:
        master = make()
        target = device if "device" in kind.target else master.line.link.id
        master.line.inject(FaultSpec(kind.kind, target, 0.0, magnitude=magnitude))
        for chunk in [*chunks, ASK, b"BATH\r"]:
            master.send(chunk)
            master.wait(0.1)
