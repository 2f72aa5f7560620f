"""The base of all file tables, and the kinds of text that stand in them."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Annotated

from pydantic import BaseModel, ConfigDict, Field, PrivateAttr

from rigd.config.lines import Path


class Table(BaseModel):
    """A TOML table: no unknown keys, never changed. ``key_path`` is where it stands in the file."""

    model_config = ConfigDict(
        extra="forbid", frozen=True, validate_by_name=True, validate_by_alias=True, defer_build=True
    )
    _key_path: Path = PrivateAttr(default=())

    @property
    def key_path(self) -> Path:
        """Path of this table in its file."""
        return self._key_path

    def put(self, key_path: Path) -> None:
        """Remember where this table stands; called once, by the reader."""
        self._key_path = key_path


@dataclass(frozen=True, slots=True)
class IfMissing:
    """Annotation: code and remedy of the finding when this required key is missing or empty."""

    code: str
    remedy: str


ID_PATTERN = r"^[A-Za-z][A-Za-z0-9_-]{0,39}$"
NAME_PATTERN = r"^[A-Za-z0-9][A-Za-z0-9 ,()'_-]{0,59}$"

Id = Annotated[str, Field(pattern=ID_PATTERN)]
"""Name of a part, tag, device or rule: it becomes part of tag names, topics and file names."""
Name = Annotated[str, Field(pattern=NAME_PATTERN)]
"""Name of a substance: blanks allowed, no dots or slashes."""
Text = Annotated[str, Field(min_length=1, max_length=2000)]
Flag = Annotated[bool, Field(strict=True)]
Whole = Annotated[int, Field(strict=True, ge=0, le=2**53)]
Count = Annotated[int, Field(strict=True, ge=1, le=1_000_000)]
Number = Annotated[float, Field(strict=True, allow_inf_nan=False, ge=-1e12, le=1e12)]
NotNegative = Annotated[float, Field(strict=True, allow_inf_nan=False, ge=0, le=1e12)]


def ns(seconds: float) -> int:
    """Seconds as integer nanoseconds."""
    return round(seconds * 1_000_000_000)
