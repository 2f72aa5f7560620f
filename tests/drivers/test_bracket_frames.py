"""Frames of the bracket protocol: what is sent, what is taken for an answer, and what never is."""

from __future__ import annotations

import re

import pytest
from fakes import transcripts
from fakes.paper_device import meaning, reply
from hypothesis import given
from hypothesis import strategies as st

from rigd.model.errors import DeviceProtocolError, DeviceRefused, LocalProtocolError
from rigd_drivers.bracket import (
    REPLY_MAX,
    REQUEST_MAX,
    BracketReader,
    DeviceBusy,
    Words,
    bit,
    done,
    encode_request,
    exact_reply,
    named,
    number,
    whole,
)

BRACKET = ["ir_cell", "selector_valve", "sensor_module", "syringe_pump"]


def text(words: Words) -> str:
    return " ".join(words)


def reader(address: int = 11, number: int = 7) -> BracketReader[str]:
    return BracketReader(address, number, ("status?",), text)


@pytest.mark.parametrize("name", BRACKET)
def test_every_request_of_the_transcripts_is_what_we_send(name: str) -> None:
    for exchange in (e for dialogue in transcripts.load(name) for e in dialogue.exchanges):
        address, counted = int(exchange.request[1:3]), int(exchange.request[3:5], 16)
        assert encode_request(address, counted, meaning(exchange.request).split(" ")) == exchange.request


@pytest.mark.parametrize("name", BRACKET)
def test_every_reply_of_the_transcripts_is_found_and_understood(name: str) -> None:
    for exchange in (e for dialogue in transcripts.load(name) for e in dialogue.exchanges if e.reply):
        assert exchange.reply is not None
        address, counted = int(exchange.request[1:3]), int(exchange.request[3:5], 16)
        kind, *words = meaning(exchange.reply).split(" ")
        one = BracketReader(address, counted, ("x",), text)
        if kind == "ok":
            assert one.feed(exchange.reply) == " ".join(words)
        else:
            with pytest.raises(DeviceBusy if kind == "busy" else DeviceRefused, match=words[0] if words else "busy"):
                one.feed(exchange.reply)


@pytest.mark.parametrize(
    "noise",
    [
        b"",
        b"\x00\xff\n",
        b"{1107 status?}0CD9\n",  # our own echo
        b"(1107 ok torn",  # torn, its line feed lost: the whole one follows on the same line
        b"(1107 ok wrong)0000\n",
        reply(b"12", b"07", "ok foreign"),
        reply(b"11", b"06", "ok late"),
        reply(b"11", b"07", "ok torn")[3:],
        b"x" * 3 * REPLY_MAX,
        b"()()({}\r\r\n(",
    ],
)
def test_noise_before_the_answer_does_not_matter(noise: bytes) -> None:
    answer = reply(b"11", b"07", "ok state=stopped")
    assert reader().feed(noise + answer) == "state=stopped"
    one = reader()
    fed = [one.feed(bytes([byte])) for byte in noise + answer]
    assert fed[-1] == "state=stopped"
    assert fed[:-1] == [None] * (len(fed) - 1)


def test_a_carriage_return_before_the_line_feed_is_accepted() -> None:
    assert reader().feed(reply(b"11", b"07", "ok a")[:-1] + b"\r\n") == "a"


@pytest.mark.parametrize(
    "frame",
    [
        reply(b"11", b"07", "ok a")[:-1],  # no line feed yet
        reply(b"11", b"07", "ok a").lower(),
        reply(b"11", b"7", "ok a"),
        reply(b"11", b"07", "ok\ta"),
        reply(b"11", b"07", "ok " + "a" * REPLY_MAX),
        reply(b"11", b"07", "ok a").replace(b"(", b"{").replace(b")", b"}"),
    ],
)
def test_what_is_no_reply(frame: bytes) -> None:
    assert reader().feed(frame) is None


@pytest.mark.parametrize("answer", ["yes", "OK", "no", "no ", "okay a"])
def test_an_answer_against_the_manual_is_said(answer: str) -> None:
    with pytest.raises(DeviceProtocolError, match="against the manual"):
        reader().feed(reply(b"11", b"07", answer))


def test_what_cannot_be_decoded_is_said() -> None:
    with pytest.raises(DeviceProtocolError, match="'ok 3' to 'stop' is against the manual: no words belong here"):
        BracketReader(11, 7, ("stop",), done).feed(reply(b"11", b"07", "ok 3"))


@pytest.mark.parametrize(
    ("address", "counted", "words"),
    [
        (100, 1, ("stop",)),
        (-1, 1, ("stop",)),
        (11, 256, ("stop",)),
        (11, 1, ()),
        (11, 1, ("two words",)),
        (11, 1, ("brace}",)),
        (11, 1, ("",)),
        (11, 1, ("caf\u00e9",)),
        (11, 1, ("line\n",)),
        (11, 1, ("x" * REQUEST_MAX,)),
    ],
)
def test_nonsense_is_not_sent(address: int, counted: int, words: Words) -> None:
    with pytest.raises(LocalProtocolError):
        encode_request(address, counted, words)


def test_the_longest_request_is_120_bytes() -> None:
    assert len(encode_request(11, 1, ("x" * (REQUEST_MAX - 12),))) == REQUEST_MAX
    with pytest.raises(LocalProtocolError, match="too long"):
        encode_request(11, 1, ("x" * (REQUEST_MAX - 11),))


def test_the_pattern_of_an_exact_reply_holds_its_checksum() -> None:
    pattern, answer = exact_reply(11, 0xF0, "ok at=1"), reply(b"11", b"F0", "ok at=1")
    assert re.fullmatch(pattern, answer)
    assert re.fullmatch(pattern, answer[:-1] + b"\r\n")
    assert not re.search(pattern, answer[:-5] + b"0000\n")


@pytest.mark.parametrize("wrong", ["", "nan", "inf", "1e3", "+1", " 1", "0x1", "1.", ".5", "1_0", "٣", "9" * 10])
def test_what_is_no_number(wrong: str) -> None:
    with pytest.raises(ValueError, match="not a number"):
        number(wrong)


def test_numbers_bits_and_names() -> None:
    assert number("-0.008") == -0.008
    assert whole("236") == 236
    assert (bit("0"), bit("1")) == (False, True)
    assert named(["a=1", "b=x=y"], "a", "b") == ["1", "x=y"]
    for wrong in (["a=1"], ["b=1", "a=2"], ["a=", "b=1"], ["a=1", "b=2", "c=3"]):
        with pytest.raises(ValueError, match="a, b are needed"):
            named(wrong, "a", "b")
    with pytest.raises(ValueError, match="whole"):
        whole("-1")
    with pytest.raises(ValueError, match="neither"):
        bit("2")


@given(st.binary(max_size=300))
def test_any_bytes_neither_crash_nor_answer(data: bytes) -> None:
    """A made-up answer needs two digits of address, two of number and a right checksum: chance does not find it."""
    assert reader().feed(data) is None


@given(st.lists(st.sampled_from([b"(1107 ok ", b"(", b")", b"{1107 ", b"a=1", b")B1FA\n", b"\n", b"\r", b"ok", b" "])))
def test_scraps_of_frames_neither_crash_nor_answer(scraps: list[bytes]) -> None:
    one = reader()
    for scrap in scraps:
        assert one.feed(scrap) is None


@given(st.binary(max_size=60), st.integers(0, 99), st.integers(0, 255))
def test_only_the_right_address_and_number_answer(noise: bytes, address: int, counted: int) -> None:
    frame = noise.replace(b"\n", b"") + b"\n" + reply(b"%02d" % address, b"%02X" % counted, "ok a")
    assert reader().feed(frame) == ("a" if (address, counted) == (11, 7) else None)


@given(st.integers(0, 10**6))
def test_no_single_wrong_byte_is_believed(where: int) -> None:
    frame = bytearray(reply(b"11", b"07", "ok state=delivering flow=0.2500"))
    at, change = where % (len(frame) - 1), 1 + where // 97 % 255
    frame[at] ^= change
    assert reader().feed(bytes(frame)) is None
