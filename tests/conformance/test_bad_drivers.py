"""The battery finds out bad drivers: each one here is the template's good one with one bad habit."""

from __future__ import annotations

import asyncio
import importlib
import json
import subprocess
import sys
import time
from collections.abc import Callable, Iterator, Sequence
from dataclasses import replace
from pathlib import Path
from types import ModuleType
from typing import Any

import pytest

from rigd.conformance import DriverContract
from rigd.console.cli import call
from rigd.model.devices import DeviceIdentity, DeviceSpec, LastWill, LinkSpec
from rigd.model.orders import Order
from rigd.model.samples import Reading
from rigd.ports.driver import Driver
from rigd.ports.link import Line

NAME = "house-of-cards-valve"


@pytest.fixture(scope="module")
def project(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Path]:
    folder = tmp_path_factory.mktemp("stranger") / NAME
    assert call(["driver", "new", NAME, str(folder)]) == 0
    added = [str(folder / "src"), str(folder / "tests")]
    sys.path[:0] = added
    yield folder
    for entry in added:
        sys.path.remove(entry)


@pytest.fixture(scope="module")
def trial(project: Path) -> ModuleType:
    """The template's own test module."""
    specification = importlib.util.spec_from_file_location("the_template_tests", project / "tests/test_contract.py")
    assert specification is not None
    assert specification.loader is not None
    module = importlib.util.module_from_spec(specification)
    specification.loader.exec_module(module)
    return module


class Bad:
    """A driver that hands everything on to a good one; derive and spoil."""

    def __init__(self, good: Driver) -> None:
        self.good = good

    async def identify(self, line: Line) -> DeviceIdentity:
        return await self.good.identify(line)

    async def prepare(self, line: Line) -> bool:
        return await self.good.prepare(line)

    async def poll(self, line: Line, channels: Sequence[str]) -> Sequence[Reading]:
        return await self.good.poll(line, channels)

    async def execute(self, line: Line, order: Order) -> None:
        await self.good.execute(line, order)

    def last_will(self, link: LinkSpec) -> LastWill:
        return self.good.last_will(link)


class SwallowsCancellation(Bad):
    async def execute(self, line: Line, order: Order) -> None:
        try:
            await self.good.execute(line, order)
        except asyncio.CancelledError:
            return


class GoesOnAfterCancellation(Bad):
    async def execute(self, line: Line, order: Order) -> None:
        try:
            await self.good.execute(line, order)
        except asyncio.CancelledError:
            self.rest = asyncio.ensure_future(self.good.execute(line, order))
            raise


class BlocksTheLoop(Bad):
    async def poll(self, line: Line, channels: Sequence[str]) -> Sequence[Reading]:
        time.sleep(0.08)  # noqa: ASYNC251 - that is what is bad about it
        return await self.good.poll(line, channels)


class RaisesJunk(Bad):
    async def execute(self, line: Line, order: Order) -> None:
        try:
            await self.good.execute(line, order)
        except Exception as error:
            raise ValueError("oops") from error


class LiesOnIdentity(Bad):
    async def identify(self, line: Line) -> DeviceIdentity:
        return DeviceIdentity("bench", "SV-T", "V-0001")


class RemembersIdentity(Bad):
    who: DeviceIdentity | None = None

    async def identify(self, line: Line) -> DeviceIdentity:
        told = await self.good.identify(line)
        self.who = self.who or told
        return self.who


class ClaimsToBeSimulated(Bad):
    async def identify(self, line: Line) -> DeviceIdentity:
        return replace(await self.good.identify(line), simulated=True)


class KeepsTheLine(Bad):
    line: Line | None = None

    async def poll(self, line: Line, channels: Sequence[str]) -> Sequence[Reading]:
        self.line = self.line or line
        return await self.good.poll(self.line, channels)


class LeavesATask(Bad):
    async def poll(self, line: Line, channels: Sequence[str]) -> Sequence[Reading]:
        self.task = asyncio.ensure_future(asyncio.sleep(5))
        return await self.good.poll(line, channels)


class RemembersValues(Bad):
    kept: Sequence[Reading] = ()

    async def poll(self, line: Line, channels: Sequence[str]) -> Sequence[Reading]:
        self.kept = self.kept or await self.good.poll(line, channels)
        return self.kept


HABITS: list[tuple[type[Bad], str]] = [
    (SwallowsCancellation, "test_a_cancelled_call_is_over_at_once_and_says_so"),
    (GoesOnAfterCancellation, "test_a_cancelled_call_is_over_at_once_and_says_so"),
    (BlocksTheLoop, "test_no_step_holds_up_the_loop"),
    (RaisesJunk, "test_bad_bytes_raise_only_what_the_contract_knows"),
    (LiesOnIdentity, "test_identity_is_asked_for_at_every_open"),
    (RemembersIdentity, "test_another_device_in_its_place_is_seen"),
    (ClaimsToBeSimulated, "test_another_device_in_its_place_is_seen"),
    (KeepsTheLine, "test_the_line_is_used_during_the_call_only"),
    (LeavesATask, "test_the_line_is_used_during_the_call_only"),
    (RemembersValues, "test_a_poll_moves_nothing_and_sees_changes"),
]


def spoilt(trial: ModuleType, bad: Callable[[Driver], Driver]) -> DriverContract:
    """The template's battery with a spoilt driver."""
    case = trial.TestDriver.case
    make: Callable[[DeviceSpec], Driver] = case.family.make

    class Spoilt(DriverContract):
        pass

    Spoilt.case = replace(case, family=replace(case.family, make=lambda spec: bad(make(spec))))
    return Spoilt()


@pytest.mark.parametrize(("bad", "test"), HABITS, ids=lambda given: getattr(given, "__name__", ""))
def test_a_bad_habit_is_found_out(trial: ModuleType, bad: Any, test: str) -> None:
    with pytest.raises((AssertionError, ValueError, pytest.fail.Exception)):
        getattr(spoilt(trial, bad), test)()


@pytest.mark.parametrize("test", sorted({test for _, test in HABITS}))
def test_the_good_one_passes_what_the_bad_ones_fail(trial: ModuleType, test: str) -> None:
    getattr(spoilt(trial, Bad), test)()


def test_installed_families_are_listed_with_their_origin(capsys: pytest.CaptureFixture[str]) -> None:
    assert call(["driver", "list", "--json"]) == 0
    found = {one["name"]: one for one in json.loads(capsys.readouterr().out)["drivers"]}
    assert found["syringe-pump"]["origin"] == "package rigd, rigd_drivers.syringe_pump:FAMILY"
    assert found["selector-valve"]["title"] == "selector valve with 2 to 10 positions"


def test_names_that_cannot_be_are_refused_and_nothing_is_overwritten(tmp_path: Path) -> None:
    assert call(["driver", "new", "My Valve", str(tmp_path / "x")]) == 2
    assert call(["driver", "new", "my-valve", str(tmp_path)]) == 2
    assert not (tmp_path / "x").exists()
    assert list(tmp_path.iterdir()) == []


def test_the_template_is_in_order(project: Path) -> None:
    """Its own lines obey the style of this house, but for the order of imports, which depends on the name."""
    config = Path(__file__).parents[2] / "pyproject.toml"
    for words in (["check", "--ignore", "I001"], ["format", "--check"]):
        ran = subprocess.run(
            [sys.executable, "-m", "ruff", *words, "--no-cache", "--config", str(config), str(project)],
            capture_output=True, text=True, check=False,
        )  # fmt: skip
        assert ran.returncode == 0, ran.stdout + ran.stderr
