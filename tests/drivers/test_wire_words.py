"""Words of the five families: what transcripts say is understood, what is against the manual is refused."""

from __future__ import annotations

import math
from collections.abc import Callable
from typing import Any

import pytest
from fakes import transcripts
from fakes.paper_device import meaning
from hypothesis import given
from hypothesis import strategies as st

from rigd.model.devices import VALVE_LOST, VALVE_MOVING, PumpState
from rigd.model.errors import DeviceRefused, LocalProtocolError
from rigd.model.orders import Action
from rigd.model.samples import Reading
from rigd_drivers import common
from rigd_drivers.chiller import wire as chiller
from rigd_drivers.ir_cell import wire as cell
from rigd_drivers.selector_valve import wire as valve
from rigd_drivers.sensor_module import wire as sensors
from rigd_drivers.syringe_pump import wire as pump


def answers(name: str, title: str = "") -> dict[str, list[list[str]]]:
    """Request words -> words after ``ok`` of all its answers, in order."""
    found: dict[str, list[list[str]]] = {}
    for dialogue in transcripts.load(name):
        for exchange in dialogue.exchanges:
            if exchange.reply and dialogue.title.startswith(title):
                kind, *words = meaning(exchange.reply).split(" ")
                if kind == "ok":
                    found.setdefault(meaning(exchange.request), []).append(words)
    return found


# --- common


def test_identity_with_and_without_the_word_simulated() -> None:
    (words, *_) = answers("syringe_pump")["who?"]
    who = common.identity(words)
    assert (who.maker, who.model, who.serial_no, who.firmware, who.simulated) == (
        "bench",
        "SP2",
        "SP2-0011",
        "1.0",
        True,
    )
    assert not common.identity(words[:4]).simulated


@pytest.mark.parametrize(
    "text", ["", "a b c", "a b c d real", "a b c d simulated x", "state=stopped flow=0 a b", "a  b c"]
)
def test_what_is_no_identity(text: str) -> None:
    with pytest.raises(ValueError, match="needed"):
        common.identity(text.split(" "))


def test_flags_and_silence() -> None:
    assert common.flags(["restarted=1", "fault=0"]) == common.Flags(True, False)
    assert common.silence(["10.0"]) == 10.0
    assert common.silence_words(2.55) in (("silence", "2.5"), ("silence", "2.6"))
    with pytest.raises(ValueError, match="neither 0 nor 1"):
        common.flags(["restarted=2", "fault=0"])
    with pytest.raises(ValueError, match="restarted, fault are needed"):
        common.flags(["fault=0"])
    with pytest.raises(ValueError, match="one number"):
        common.silence([])


# --- syringe pump


def test_every_status_of_the_transcripts() -> None:
    seen = [pump.status(words) for words in answers("syringe_pump")["status?"]]
    assert {status.state for status in seen} == set(PumpState)
    assert pump.status(answers("syringe_pump", "stalled")["status?"][0]) == pump.Status(
        PumpState.STALLED, 0.0, 4.0, 5.0, 0.0, False
    )
    assert pump.status(answers("syringe_pump", "a device that is busy")["status?"][0]).fault


def test_bores_of_the_transcripts() -> None:
    assert pump.bores(answers("syringe_pump", "who")["bores?"][0]) == pump.Bores(2, 10.3, 5.0)
    assert pump.bores(answers("syringe_pump", "one syringe")["bores?"][0]).syringes == 1


@pytest.mark.parametrize(
    ("action", "value", "words"),
    [
        (Action.DELIVER, 0.25, "rate 0.2500"),
        (Action.DELIVER, 4.99999, "rate 5.0000"),
        (Action.DELIVER, 0.0, "stop"),
        (Action.STOP, math.nan, "stop"),
        (Action.FILL, 5.0, "fill 5.000"),
        (Action.SWAP, 0.0, "swap"),
    ],
)
def test_orders_in_the_words_of_the_pump(action: Action, value: float, words: str) -> None:
    assert " ".join(pump.order_words(action, value)) == words


@pytest.mark.parametrize(
    ("action", "value"),
    [
        (Action.DELIVER, -1.0),
        (Action.DELIVER, math.nan),
        (Action.DELIVER, math.inf),
        (Action.FILL, 0.0),
        (Action.FILL, 1e9),
        (Action.MOVE, 1.0),
    ],
)
def test_orders_that_no_pump_can_carry_out(action: Action, value: float) -> None:
    with pytest.raises(LocalProtocolError):
        pump.order_words(action, value)


# --- valve


def test_positions_count_from_zero_here() -> None:
    assert [valve.position([f"at={at}"]) for at in ("1", "2", "10", "0", "?")] == [0, 1, 9, VALVE_MOVING, VALVE_LOST]
    assert valve.order_words(Action.MOVE, 0.0, 3) == ("to", "1")
    assert valve.positions(answers("selector_valve")["positions?"][0]) == 3
    with pytest.raises(ValueError, match="no position 11"):
        valve.position(["at=11"])


@pytest.mark.parametrize("index", [-1.0, 3.0, 0.5, math.nan, math.inf])
def test_a_valve_is_never_sent_where_it_has_no_position(index: float) -> None:
    with pytest.raises(LocalProtocolError):
        valve.order_words(Action.MOVE, index, 3)


# --- sensors


def test_values_codes_and_broken_inputs() -> None:
    (read,) = answers("sensor_module", "read")["read? p1 p2 t1"]
    assert sensors.readings(read, ["p1", "p2", "t1"]) == [
        Reading("p1", 0.412, 10244),
        Reading("p2", 0.401, 10233),
        Reading("t1", 59.98, 20998),
    ]
    (broken,) = answers("sensor_module", "broken")["read? p1 p2 t1"]
    low, high, opened = sensors.readings(broken, ["p1", "p2", "t1"])
    assert all(math.isnan(reading.value) for reading in (low, high, opened))
    assert [reading.fault.split(":")[0] for reading in (low, high, opened)] == ["LOW", "HIGH", "OPEN"]
    (negative,) = answers("sensor_module", "negative")["read? p1 p2 t1 t2"]
    assert sensors.readings(negative, ["p1", "p2", "t1", "t2"])[2].value == -40.0


@pytest.mark.parametrize(
    "text", ["p1=0.412", "p1=OPEN", "p1=x/1", "p1=1.0/-1", "p1=/1", "p2=0.4/1", "p1=1/1 p2=1/1", ""]
)
def test_what_is_no_reading(text: str) -> None:
    with pytest.raises(ValueError, match=r"lacks|is not a|are needed"):
        sensors.readings(text.split(" "), ["p1"])


def test_span_of_an_input() -> None:
    assert sensors.span(answers("sensor_module")["span? p1"][0]) == sensors.Span(0.0, 25.0, "bar")


# --- IR cell


def test_twos_complement_in_tenths_of_a_thousandth() -> None:
    (words,) = answers("ir_cell", "two's complement")["spectrum?"]
    finished = cell.spectrum(words, 5)
    assert finished.absorbance == pytest.approx((0.0015, -0.0015, 3.2767, -3.2768, 0.0), abs=1e-12)
    assert (finished.count, finished.age_s) == (17, 1.2)
    (grid,) = answers("ir_cell", "two's complement")["grid?"]
    assert cell.grid(grid) == cell.Grid(5, 1000.0, 2.5, 5.0)
    with pytest.raises(ValueError, match="20 digits of data, 16 are needed"):
        cell.spectrum(words, 4)


@pytest.mark.parametrize("data", ["000", "000g", "000f", "00 0F", ""])
def test_what_is_no_data(data: str) -> None:
    with pytest.raises(ValueError, match="needed"):
        cell.spectrum(["count=1", "age=1.0", f"data={data}"], 1)


@pytest.mark.parametrize(
    "grid",
    ["n=0 from=860.0 step=4.0 every=5.0", "n=9999 from=1.0 step=1.0 every=1.0", "n=5 from=1.0 step=0.0 every=1.0"],
)
def test_what_is_no_grid(grid: str) -> None:
    with pytest.raises(ValueError, match="no grid"):
        cell.grid(grid.split(" "))


# --- chiller


def chiller_reader(decode: Callable[[str], Any], asked: str = "BATH") -> chiller.LineReader[Any]:
    return chiller.LineReader(asked, decode)


def test_every_answer_of_the_chiller_in_the_transcripts() -> None:
    decoders: dict[str, Callable[[str], Any]] = {
        "ID": chiller.identity,
        "STATUS": chiller.status,
        "CLEAR": chiller.accepted,
        "SET": chiller.setpoint,
        "RUN": chiller.running,
        "BATH": chiller.bath,
    }
    for exchange in (e for dialogue in transcripts.load("chiller") for e in dialogue.exchanges):
        asked = exchange.request[:-1].decode()
        decode = decoders.get(asked, chiller.accepted)
        assert exchange.reply is not None
        if exchange.reply.startswith(b"ERR"):
            with pytest.raises(DeviceRefused, match=exchange.reply.split()[1].decode()):
                chiller_reader(decode, asked).feed(exchange.reply)
        else:
            assert chiller_reader(decode, asked).feed(exchange.reply) is not None


def test_chiller_values() -> None:
    assert chiller.bath("BATH -12.34") == -12.34
    assert chiller.setpoint("SET -5.5") == -5.5
    assert chiller.status("STATUS 011") == chiller.Status(False, True, True)
    assert chiller.Status(False, True, False).trouble == "low level"
    assert chiller.Status(False, False, True).trouble == "the chiller reports a fault"
    who = chiller.identity("CB-1 CB1-0001 1.0 SIMULATED")
    assert who is not None
    assert (who.model, who.serial_no, who.simulated) == ("CB-1", "CB1-0001", True)
    assert chiller.identity("SET 20.0 OK") is None


@pytest.mark.parametrize(
    "noise",
    [
        b"TH 22.00\r\n",
        b"SET 20.0\r\n",
        b"OK\r\n",
        b"BATH 22.0",
        b"BATH 22.0BATH 1.00\r\n",
        b"\x00\xff\r\n",
        b"BATH\r\n",
    ],
)
def test_lines_that_cannot_be_the_answer_are_skipped(noise: bytes) -> None:
    assert chiller_reader(chiller.bath).feed(noise) is None
    assert chiller_reader(chiller.bath).feed(noise + b"\r\nBATH 59.98\r\n") == 59.98


@pytest.mark.parametrize(
    ("value", "words"), [(60.0, "SET 60.0"), (-5.55, "SET -5.5"), (-0.04, "SET 0.0"), (20.06, "SET 20.1")]
)
def test_set_points_have_one_decimal(value: float, words: str) -> None:
    assert chiller.set_words(value) == words


def test_what_is_no_set_point_and_no_switch() -> None:
    for value in (math.nan, math.inf, -300.0, 1e6):
        with pytest.raises(LocalProtocolError):
            chiller.set_words(value)
    for value in (0.5, 2.0, math.nan):
        with pytest.raises(LocalProtocolError):
            chiller.run_words(value)


# --- any bytes, any words


@given(st.binary(max_size=400))
def test_any_bytes_into_the_chiller_reader(data: bytes) -> None:
    """Only a line that is exactly an answer may be one; made of random bytes it can only be a refusal or nothing."""
    try:
        answer = chiller_reader(chiller.bath).feed(data)
    except DeviceRefused:
        assert b"ERR " in data
    else:
        assert answer is None or any(chiller.bath(line.decode("latin-1")) == answer for line in data.split(b"\r\n"))


GOOD: list[tuple[str, Callable[[Any], object]]] = [
    ("bench SP2 SP2-0011 1.0 simulated", common.identity),
    ("restarted=0 fault=0", common.flags),
    ("10.0", common.silence),
    ("n=2 bore=10.30 stroke=5.000", pump.bores),
    ("state=empty flow=0.0000 level=0.000 standby=0.000 delivered=0.1000 fault=0", pump.status),
    ("at=2", valve.position),
    ("n=3", valve.positions),
    ("low=0.000 high=25.000 unit=bar", sensors.span),
    ("p1=0.412/10244 t1=OPEN/0", lambda words: sensors.readings(words, ["p1", "t1"])),
    ("n=236 from=860.0 step=4.0 every=5.0", cell.grid),
    ("count=17", cell.count),
    ("count=17 age=1.2 data=000F0013FFFF", lambda words: cell.spectrum(words, 3)),
]


@given(st.sampled_from(GOOD), st.data())
def test_bent_words_are_decoded_or_refused_with_a_reason(good: tuple[str, Callable[[Any], object]], draw: Any) -> None:
    text, decode = good
    assert decode(text.split(" ")) is not None
    at = draw.draw(st.integers(0, len(text)))
    bent = (
        text[:at]
        + draw.draw(st.text("=?./-+ eE_0123456789anx", max_size=3))
        + text[at + draw.draw(st.integers(0, 3)) :]
    )
    reason = "undecided"
    try:
        decode(bent.split(" "))
    except ValueError as error:
        reason = str(error)
    assert reason
