"""What the manual asks of single devices beyond the transcripts."""

from __future__ import annotations

import pytest
from fakes.emulated import (
    LINK,
    Master,
    chiller_line,
    ir_line,
    pump_line,
    request,
    sensor_line,
    spec,
    valve_line,
)
from fakes.plain_plant import PlainBath, PlainPlant, PlainPump, PlainValve

from rigd.model.errors import ConfigError
from rigd.model.rig import Pump, Valve
from rigd.model.samples import Spectrum
from rigd.ports.plant import FaultSpec
from rigd_sim.emulators.device import word
from rigd_sim.emulators.lines import BracketLine
from rigd_sim.emulators.selector_valve import SelectorValve
from rigd_sim.emulators.syringe_pump import SyringePump


class OneSpectrum(PlainPlant):
    """A plant whose cell shows the same spectrum for ever."""

    def __init__(self, shown: Spectrum) -> None:
        super().__init__()
        self._shown = shown

    def spectrum(self, device: str) -> Spectrum:
        """That spectrum."""
        return self._shown


def bus() -> Master:
    """Two pumps and a valve on one line."""
    units: dict[str, PlainPump | PlainValve | PlainBath] = {"P1": PlainPump(), "P2": PlainPump(), "V": PlainValve()}
    plant = PlainPlant(units, {"p1": "P1", "p2": "P2", "v": "V"})
    pumps = [
        SyringePump(
            spec(f"p{i}", "syringe-pump", f"1{i}", f"P{i}"), plant, Pump(f"P{i}", f"p{i}", 2, 10, 5, 0.005, 5, 8, 20)
        )
        for i in (1, 2)
    ]
    valve = SelectorValve(spec("v", "selector-valve", "21", "V"), plant, Valve("V", "v", ("a", "b"), "a", 1, 20))
    return Master(BracketLine(LINK, [*pumps, valve]), plant)


def test_devices_on_one_line_answer_for_themselves_only() -> None:
    master = bus()
    assert master.ask("11", "rate 1.0") == "ok"
    assert "state=delivering" in master.ask("11", "status?")
    assert "state=stopped" in master.ask("12", "status?")
    assert master.ask("21", "at?") == "ok at=1"
    assert master.ask("99", "who?") == ""


def test_stop_for_all_stops_all_and_nobody_answers() -> None:
    master = bus()
    assert [master.ask(address, "rate 1.0") for address in ("11", "12")] == ["ok", "ok"]
    assert master.send(request("00", "77", "stop")) == b""
    assert all("state=stopped" in master.ask(address, "status?") for address in ("11", "12"))


def test_replies_to_requests_in_one_burst_come_one_after_the_other() -> None:
    master = bus()
    burst = request("11", "01", "status?") + request("12", "02", "status?")
    (first, _), (second, reply) = master.line.feed(burst, 0.0)
    assert second - first > len(reply) * 10 / 115200


@pytest.mark.parametrize(("words", "limit_s"), [("status?", 0.05), ("who?", 0.05)])
def test_answers_come_within_the_time_of_the_manual(words: str, limit_s: float) -> None:
    ((delay_s, _),) = pump_line().line.feed(request("11", "01", words), 0.0)
    assert 0 < delay_s <= limit_s


def test_a_spectrum_comes_within_the_time_of_the_manual_and_faster_in_a_paced_run() -> None:
    master = ir_line({"n": "236"})
    master.wait(6)
    ((delay_s, reply),) = master.line.feed(request("41", "01", "spectrum?"), master.now_s)
    assert len(reply) * 10 / 115200 < delay_s <= 0.15


def test_a_repeated_request_is_not_carried_out_again_but_a_new_one_under_its_number_is() -> None:
    master = pump_line({"level_mL": "4", "standby_mL": "3"})
    first = master.send(request("11", "10", "swap"))
    assert master.send(request("11", "10", "swap")) == first
    assert "level=3.000" in master.ask("11", "status?")
    master.send(request("11", "20", "rate 1.0"))
    assert b" ok)" in master.send(request("11", "20", "stop"))
    assert "state=stopped" in master.ask("11", "status?")


def test_silence_is_wall_time_so_it_stretches_with_the_pace() -> None:
    master = pump_line(pace=10.0)
    assert master.ask("11", "silence 1") == "ok"
    assert master.ask("11", "rate 1.0") == "ok"
    master.wait(9.5)
    assert master.plant.read("pump", ("state",))[0].value == 1
    master.wait(1.0)
    assert master.plant.read("pump", ("state",))[0].value == 0


def test_foreign_frames_and_garbage_do_not_feed_the_time_out() -> None:
    master = pump_line()
    master.ask("11", "silence 1")
    master.ask("11", "rate 1.0")
    for _ in range(15):
        master.wait(0.1)
        master.send(request("12", "01", "status?") + b"{1101 status?}0000\n")
        master.send(request("00", "01", "rate 1.0"))
    assert "state=stopped" in master.ask("11", "status?")


def test_a_loss_of_power_forgets_everything_set() -> None:
    master = pump_line()
    for words in ("seen", "silence 60", "rate 1.0"):
        assert master.ask("11", words) == "ok"
    master.wait(6)
    assert "delivered=0.1" in master.ask("11", "status?")
    master.line.inject(FaultSpec("device-reboot", "pump", master.now_s, magnitude=2.0))
    master.wait(1)
    assert master.ask("11", "status?") == ""
    master.wait(1.5)
    assert master.ask("11", "flags?") == "ok restarted=1 fault=0"
    assert master.ask("11", "silence?") == "ok 0.0"
    assert "state=stopped" in (status := master.ask("11", "status?"))
    assert "delivered=0.0000" in status


def test_a_restarted_device_does_not_repeat_an_answer_of_its_former_life() -> None:
    master = valve_line()
    frame = request("21", "05", "flags?")
    master.send(request("21", "04", "seen"))
    assert b"restarted=0" in master.send(frame)
    master.line.inject(FaultSpec("device-reboot", "valve", master.now_s, magnitude=0.0))
    master.wait(0.1)
    assert b"restarted=1" in master.send(frame)


def test_a_chiller_that_lost_power_is_off_and_back_at_its_start() -> None:
    master = chiller_line()
    assert [master.plain(words) for words in ("CLEAR", "SET 60.0", "RUN 1")] == ["OK"] * 3
    master.line.inject(FaultSpec("device-reboot", "chiller", 0.0, magnitude=1.0))
    master.wait(0.5)
    assert master.plain("RUN") == ""
    master.wait(1)
    assert [master.plain(words) for words in ("RUN", "SET", "STATUS")] == ["RUN 0", "SET 20.0", "STATUS 100"]


def test_the_counter_of_spectra_starts_anew_after_a_loss_of_power() -> None:
    master = ir_line()
    master.wait(12)
    assert master.ask("41", "count?") == "ok count=2"
    master.line.inject(FaultSpec("device-reboot", "ir", master.now_s, magnitude=1.0))
    master.wait(1.5)
    assert master.ask("41", "count?") == "ok count=0"
    assert master.ask("41", "spectrum?").startswith("no state")
    master.wait(7)
    assert master.ask("41", "count?") == "ok count=1"


def test_spectrum_points_are_in_two_s_complement_of_a_tenth_of_a_milliabsorbance() -> None:
    master = ir_line()
    master.wait(5)
    assert master.ask("41", "spectrum?").endswith("data=03E803E903EA03EB03EC")


@pytest.mark.parametrize(
    ("absorbance", "text"), [(-0.0001, "FFFF"), (-9.0, "8000"), (9.0, "7FFF"), (float("nan"), "7FFF"), (0.0015, "000F")]
)
def test_a_point_beyond_the_converter_stays_at_its_end(absorbance: float, text: str) -> None:
    master = ir_line({"n": "1"})
    master.wait(5)
    shown = Spectrum("ir", 5_000_000_000, 860.0, 4.0, (absorbance,))
    master.line.devices["ir"].plant = OneSpectrum(shown)
    assert master.ask("41", "spectrum?").endswith(f"data={text}")


def test_an_unwired_input_reads_open() -> None:
    assert sensor_line({"p1": "1.5/9"}).ask("31", "read? p4 p1 p1") == "ok p4=OPEN/0 p1=1.500/9 p1=1.500/9"


@pytest.mark.parametrize(
    ("words", "reply"), [("SET 20.05", "OK"), ("SET 1e1", "ERR WORD"), ("SET nan", "ERR WORD"), ("RUN 2", "ERR WORD")]
)
def test_settings_that_are_no_settings(words: str, reply: str) -> None:
    assert chiller_line().plain(words) == reply


def test_identity_words_hold_no_blank() -> None:
    assert word("no 7 (a)") == "no-7-a"
    assert pump_line(serial_no="no 7").ask("11", "who?") == "ok bench SP2 no-7 1.0 simulated"


def test_unknown_fault_or_target_is_refused_with_what_is_known() -> None:
    line = pump_line().line
    with pytest.raises(ConfigError, match="line-dead"):
        line.inject(FaultSpec("line-fire", "bus"))
    with pytest.raises(ConfigError, match="name one of bus"):
        line.inject(FaultSpec("line-dead", "pump"))
