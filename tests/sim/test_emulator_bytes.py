"""Any bytes whatever: no crash, no false answer, and the next good request is answered."""

from __future__ import annotations

import pytest
from fakes.emulated import MAKERS, TICK_s, chiller_line, pump_line, request, valve_line
from fakes.transcripts import crc16 as bitwise_crc16
from hypothesis import given, settings
from hypothesis import strategies as st

from rigd_sim.emulators.bracket import REQUEST_MAX_BYTES, RequestReader, crc16, reply_frame

ADDRESSES = {"syringe_pump": "11", "selector_valve": "21", "sensor_module": "31", "ir_cell": "41"}

VOCABULARY = """
who? flags? seen silence silence? bores? rate stop fill swap status? to at? positions? read? span? grid? count?
spectrum? 1 0 -1 1e5 nan inf 0.25 5.000 99999999999999999999 p1 t9 = ? . + - ٣ ² SET RUN BATH ID STATUS CLEAR
"""
WORDS = st.sampled_from(VOCABULARY.split())
WORD_LISTS = st.lists(WORDS | st.text(max_size=12), max_size=6)


def test_crc_known_answer() -> None:
    # check value of the catalogue entry CRC-16/MODBUS (same polynomial, start and reflection), from memory: 0x4B37
    assert crc16(b"123456789") == 0x4B37


@given(st.binary(max_size=300))
def test_crc_agrees_with_the_bit_by_bit_form(data: bytes) -> None:
    assert crc16(data) == bitwise_crc16(data)


@given(st.lists(st.binary(max_size=200) | st.sampled_from([b"{", b"}", b"\n", b"\r", b"{1101 stop}"]), max_size=12))
@pytest.mark.parametrize("kind", sorted(MAKERS))
@settings(max_examples=60, deadline=None)
def test_garbage_gets_no_answer_and_does_no_harm(kind: str, chunks: list[bytes]) -> None:
    master = MAKERS[kind]({}) if kind != "sensor_module" else MAKERS[kind]({"p1": "0.5/1"})
    for chunk in chunks:
        master.send(chunk)
        master.wait(TICK_s)
    if kind == "chiller":
        master.send(b"\r")
        assert master.plain("ID").startswith("CB-1 ")
    else:
        assert master.ask(ADDRESSES[kind], "who?").startswith("ok bench ")


@given(WORD_LISTS)
@pytest.mark.parametrize("kind", sorted(ADDRESSES))
@settings(max_examples=150, deadline=None)
def test_any_words_in_a_right_frame_get_one_well_formed_answer(kind: str, words: list[str]) -> None:
    master = MAKERS[kind]({}) if kind != "sensor_module" else MAKERS[kind]({"p1": "0.5/1"})
    text = " ".join(words)
    frame = request(ADDRESSES[kind], "5A", text)
    reply = master.send(frame)
    fit = len(frame) <= REQUEST_MAX_BYTES and text.isascii() and text.isprintable() and "{" not in text
    if not fit:
        return
    body = reply.decode("ascii")
    assert body.startswith(f"({ADDRESSES[kind]}5A ")
    assert body[9 - 3 :].split(" ")[0].split(")")[0] in ("ok", "no")
    assert body.count("(") == body.count(")") == body.count("\n") == 1
    text_part = reply[: reply.rindex(b")") + 1]
    assert reply == text_part + b"%04X\n" % bitwise_crc16(text_part)


@given(st.lists(st.integers(1, 60), max_size=10))
def test_any_split_of_the_stream_finds_the_same_requests(cuts: list[int]) -> None:
    stream = b"\x00{11{1101 rate 0.250}" + request("11", "01", "rate 0.250") + request("21", "02", "at?") + b"{21"
    reader, found, rest = RequestReader(), [], stream
    for cut in cuts:
        found += reader.feed(rest[:cut])
        rest = rest[cut:]
    found += reader.feed(rest)
    assert [(one.address, one.number, one.words) for one in found] == [
        ("11", "01", ("rate", "0.250")),
        ("21", "02", ("at?",)),
    ]


@given(st.binary(min_size=1, max_size=40))
def test_one_damaged_byte_is_never_obeyed(damage: bytes) -> None:
    master = pump_line()
    frame = bytearray(request("11", "01", "rate 1.0000"))
    frame[damage[0] % (len(frame) - 1)] ^= 1 << (damage[-1] % 8)
    master.send(bytes(frame))
    assert "state=stopped" in master.ask("11", "status?")


def test_longest_request_is_taken_and_one_byte_more_is_not() -> None:
    master = valve_line()
    filler = REQUEST_MAX_BYTES - len(request("21", "01", "at? "))
    assert master.send(request("21", "01", "at? " + "x" * filler)) != b""
    assert master.send(request("21", "02", "at? " + "x" * (filler + 1))) == b""


def test_lower_case_checksum_is_wrong() -> None:
    master = valve_line()
    frame = next(f for n in range(256) if (f := request("21", f"{n:02X}", "at?"))[-5:].lower() != f[-5:])
    assert master.send(frame[:-5] + frame[-5:].lower()) == b""
    assert master.send(frame) != b""


def test_a_reply_beyond_the_limit_is_our_own_error() -> None:
    with pytest.raises(ValueError, match="longer than 4096"):
        reply_frame("41", "00", "x" * 4096)


def test_plain_line_answers_each_request_of_a_burst_and_survives_an_endless_one() -> None:
    master = chiller_line()
    assert master.send(b"RUN\rSET\r") == b"RUN 0\r\nSET 20.0\r\n"
    for _ in range(100):
        assert master.send(b"x" * 1000) == b""
    assert master.send(b"\r") == b"ERR WORD\r\n"
    assert master.plain("RUN") == "RUN 0"
