"""A fingerprint of what files mean: SHA-256 of their canonical content.

Canonical is JSON with sorted keys and quantities in house units, without what equals its default: neither comments,
order and spelling ("250 uL/min" or "0.25 mL/min") nor a default written out change it; any other change does.
"""

from __future__ import annotations

import hashlib
import json
from collections.abc import Iterable, Mapping

from rigd.config.table import Table


def digest_of(*tables: Table, without: frozenset[str] = frozenset()) -> str:
    """SHA-256 over the canonical form of these tables in order, in hexadecimal; top-level keys ``without`` left out."""
    content = [
        table.model_dump(mode="python", by_alias=True, exclude_defaults=True, exclude=set(without)) for table in tables
    ]
    text = json.dumps(content, sort_keys=True, ensure_ascii=True, separators=(",", ":"), default=str)
    return hashlib.sha256(text.encode("ascii")).hexdigest()


def with_cards(digest: str, cards: Iterable[Mapping[str, object]]) -> str:
    """The fingerprint of a rig with what its protocol cards say."""
    contents = {
        json.dumps(said, sort_keys=True, ensure_ascii=True, separators=(",", ":"), default=str) for said in cards
    }
    if not contents or not digest:
        return digest
    return hashlib.sha256("\n".join([digest, *sorted(contents)]).encode("ascii")).hexdigest()
