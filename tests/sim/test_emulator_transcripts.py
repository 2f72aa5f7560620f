"""The emulators reproduce the dialogues of tests/transcripts, which were computed from the manual alone."""

from __future__ import annotations

import pytest
from fakes.emulated import MAKERS
from fakes.transcripts import Dialogue, complaint, load, names

DIALOGUES = [dialogue for name in names() for dialogue in load(name) if not dialogue.only_driver]


@pytest.mark.parametrize("dialogue", DIALOGUES, ids=lambda dialogue: f"{dialogue.device}: {dialogue.title}")
def test_emulator_answers_as_the_transcript_says(dialogue: Dialogue) -> None:
    serial_no = dialogue.identity[1] if dialogue.identity else ""
    master = MAKERS[dialogue.device](dialogue.given, serial_no)
    for exchange in dialogue.exchanges:
        if exchange.wait_s:
            master.wait(exchange.wait_s)
        assert complaint(exchange, master.send(exchange.request)) == ""


def test_every_transcript_has_an_emulator() -> None:
    assert {dialogue.device for dialogue in DIALOGUES} == set(MAKERS)
    assert sum(len(dialogue.exchanges) for dialogue in DIALOGUES) > 100
