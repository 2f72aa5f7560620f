"""Invented manuals as cards, each held against a dialogue written from the manual, not from the card (tests/cards)."""

from __future__ import annotations

import asyncio
from pathlib import Path

import pytest

from rigd.model.devices import DeviceSpec
from rigd.runtime.transcript import differences, read_transcript
from rigd_drivers.card.driver import CardDevice

CARDS = Path(__file__).parents[1] / "cards"


@pytest.mark.parametrize("path", sorted(CARDS.glob("*.transcript")), ids=lambda path: path.stem)
def test_a_manual_as_a_card(path: Path) -> None:
    transcript = read_transcript(path.read_text(encoding="utf-8"))
    card = str(CARDS / transcript.facts["card"])
    device = CardDevice(
        DeviceSpec("d", "card", "", "bench", transcript.facts.get("address", ""), "u", (), options={"card": card})
    )
    assert asyncio.run(differences(device, transcript, list(device.card.channels))) == []


def test_every_card_has_a_dialogue() -> None:
    assert {path.stem for path in CARDS.glob("*.toml")} <= {path.stem for path in CARDS.glob("*.transcript")}
