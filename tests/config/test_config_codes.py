"""Every code that the room can say is provoked by a test: a new check without one fails here."""

from __future__ import annotations

import re
from pathlib import Path

import rigd.config

ROOM = Path(rigd.config.__file__).parent
SAID = re.compile(
    r'(?:error|warning|_error|_wrong|Problem|PydanticCustomError|IfMissing|return)\(?\s*\(?"([a-z]+(?:-[a-z]+)+)"'
)


def codes() -> set[str]:
    """Codes in the source of the room."""
    text = "\n".join(path.read_text(encoding="utf-8") for path in ROOM.rglob("*.py"))
    return set(SAID.findall(text)) - {"value-wrong"}  # for errors of the structure check that are not known today


def test_every_code_is_provoked_by_a_test() -> None:
    here = Path(__file__)
    tests = "\n".join(path.read_text(encoding="utf-8") for path in here.parent.glob("test_*.py") if path != here)

    found = codes()
    assert len(found) > 70
    assert not sorted(code for code in found if f'"{code}"' not in tests)
