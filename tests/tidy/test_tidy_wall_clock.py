"""Steps of the wall clock, an hour or a day either way, can move nothing: only these places look at it.

They stamp records for people, or compare dates of papers before a run begins. What decides or waits counts on the
monotonic clock.
"""

from __future__ import annotations

import re
from pathlib import Path

ROOT = Path(__file__).resolve().parents[2]
LOOK = re.compile(
    r"datetime\.now|datetime\.today|date\.today|datetime\.utcnow|time\.time\(|time\.time_ns\(|localtime|gmtime"
)
STAMPS = {
    "rigd/adapters/alert_log.py",
    "rigd/adapters/clock.py",
    "rigd/adapters/run_folder.py",
    "rigd/guard/wills.py",
    "rigd/guard/supervise.py",
}
PAPERS = {"rigd/runtime/arming.py", "rigd/runtime/calibrated.py"}


def test_only_stamps_and_papers_look_at_the_wall_clock() -> None:
    sources = [*(ROOT / "rigd").rglob("*.py"), *(ROOT / "drivers/rigd_drivers").rglob("*.py")]
    found = {str(path.relative_to(ROOT)) for path in sources if LOOK.search(path.read_text(encoding="utf-8"))}
    assert {name for name in found if not name.startswith("rigd/console/")} <= STAMPS | PAPERS
    assert not {name for name in found if name.startswith(("rigd/logic/", "rigd/analysis/"))}
