"""The unit file for systemd: what it promises must be what the daemon does."""

from __future__ import annotations

import configparser
import shlex
from pathlib import Path

from click.testing import CliRunner

from rigd.console.cli import rigd

UNIT = Path(__file__).resolve().parents[2] / "configs" / "service" / "rigd@.service"


def unit() -> configparser.ConfigParser:
    found = configparser.ConfigParser(strict=True, interpolation=None)
    found.optionxform = str  # keys of a unit file keep their case
    found.read_string(UNIT.read_text())
    return found


def test_the_service_is_watched_stopped_in_order_and_never_started_again_by_itself() -> None:
    """Keys and values as in systemd.service(5), systemd.kill(5) and sd_notify(3)."""
    service = unit()["Service"]
    assert service["Type"] == "notify"
    assert float(service["WatchdogSec"]) >= 4 * 0.5  # the guard looks twice a second
    assert service["Restart"] == "no"
    assert (service["KillMode"], service["KillSignal"]) == ("mixed", "SIGTERM")
    assert service["TimeoutStopSec"] == "20min"


def test_its_command_is_one_that_exists() -> None:
    words = shlex.split(unit()["Service"]["ExecStart"])
    assert Path(words[0]).name == "rigd"
    told = CliRunner().invoke(rigd, [words[1], "--help"]).output
    assert all(word in told for word in words[2:] if word.startswith("--"))
