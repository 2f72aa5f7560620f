"""A finding about a file or a plan: where, what was found, what is allowed, what to do."""

from __future__ import annotations

from dataclasses import dataclass
from enum import StrEnum


class Severity(StrEnum):
    """``error`` forbids a run; ``warning`` and ``note`` inform."""

    ERROR = "error"
    WARNING = "warning"
    NOTE = "note"


@dataclass(frozen=True, slots=True)
class Problem:
    """One finding. ``code`` is stable (``unit-missing``); ``file``, ``line`` and ``key`` say where, as far as known."""

    code: str
    message: str
    remedy: str = ""
    severity: Severity = Severity.ERROR
    file: str = ""
    line: int = 0
    key: str = ""

    @property
    def where(self) -> str:
        """``file:line: key`` with the parts that are known."""
        place = f"{self.file}:{self.line}" if self.line else self.file
        return ": ".join(part for part in (place, self.key) if part)

    def __str__(self) -> str:
        head = f"{self.where}: " if self.where else ""
        tail = f" -- {self.remedy}" if self.remedy else ""
        return f"{head}{self.message}{tail}"
