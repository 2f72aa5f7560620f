"""Where things meet: runtime folder, simulator, running daemons, one daemon per port, plug-ins, run folders."""

from __future__ import annotations

import json
import os
import stat
import subprocess
import sys
from importlib.metadata import EntryPoint
from pathlib import Path

import pytest

from rigd.adapters import places, plugins, run_folder
from rigd.adapters.door_client import find_daemon
from rigd.adapters.places import Daemon, announce, running_daemons, runtime_folder, simulated_ports
from rigd.adapters.port_lock import lock_ports, unlock
from rigd.config import load_pair
from rigd.model.errors import DoorError, LinkBusy, LinkError, PluginError, RigError
from rigd.ports.driver import DriverFamily

CONFIGS = Path(__file__).parents[2] / "configs"


@pytest.fixture(autouse=True)
def runtime(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    folder = tmp_path / "rt"
    monkeypatch.setenv("RIGD_RUNTIME", str(folder))
    return folder


def dead_pid() -> int:
    with subprocess.Popen([sys.executable, "-c", ""]) as child:
        child.wait()
        return child.pid


def test_the_runtime_folder_is_the_users_alone(runtime: Path) -> None:
    runtime.mkdir(mode=0o755)
    assert stat.S_IMODE(runtime_folder().stat().st_mode) == 0o700


def test_a_runtime_folder_that_cannot_be_made_is_said(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    (tmp_path / "file").touch()
    monkeypatch.setenv("RIGD_RUNTIME", str(tmp_path / "file" / "below"))
    with pytest.raises(RigError, match="set RIGD_RUNTIME"):
        runtime_folder()


def serve(rig: str, **facts: object) -> None:
    folder = places.rig_folder(rig)
    (folder / "ports.json").write_text(json.dumps({"rig": rig, "pid": os.getpid(), "pace": 20.0, **facts}))


def test_a_simulator_that_is_missing_dead_or_at_another_pace_is_said_with_its_command() -> None:
    with pytest.raises(LinkError, match=r"start it with: rigd sim rig\.toml --pace 20"):
        simulated_ports("r", "rig.toml", 20.0)
    serve("r", pid=dead_pid(), ports={})
    with pytest.raises(LinkError, match="not being served"):
        simulated_ports("r", "rig.toml", 1.0)
    serve("r", ports={"bus-1": "/dev/pts/9"})
    with pytest.raises(LinkError, match="runs at pace 20, this run at 1"):
        simulated_ports("r", "rig.toml", 1.0)
    assert simulated_ports("r", "rig.toml", 20.0) == {"bus-1": "/dev/pts/9"}


def test_daemons_are_found_by_name_and_dead_ones_are_forgotten(tmp_path: Path) -> None:
    with pytest.raises(DoorError, match="no run is going on"):
        find_daemon()
    own = Daemon(os.getpid(), "rig-a", "run-1", str(tmp_path), "/nowhere/door.sock")
    announce(own)
    left = announce(Daemon(dead_pid(), "rig-b", "run-2", str(tmp_path), str(tmp_path / "gone.sock")))
    assert running_daemons() == [own]
    assert not left.exists()
    assert find_daemon() == find_daemon("rig-a") == own
    with pytest.raises(DoorError, match=r"running: run-1 \(rig rig-a\)"):
        find_daemon("rig-b")


def test_a_second_daemon_is_refused_by_name_even_under_another_name_of_the_port(tmp_path: Path) -> None:
    port = tmp_path / "ttyA"
    port.touch()
    (tmp_path / "by-id").symlink_to(port)
    held = lock_ports([str(port), "socket://host:1"], rig="first", folder="/runs/1", pid=4242)
    for other in (str(tmp_path / "by-id"), "socket://host:1"):
        with pytest.raises(LinkBusy, match=r"process 4242 running rig 'first' \(/runs/1\)"):
            lock_ports(["socket://host:2", other], rig="second", folder="/runs/2", pid=1)
    unlock(held)
    unlock(lock_ports([str(port), "socket://host:1", "socket://host:2"], rig="second", folder="/runs/2", pid=1))


def test_a_lock_lives_as_long_as_any_process_that_inherited_it(tmp_path: Path) -> None:
    held = lock_ports(["/dev/x"], rig="first", folder="/runs/1", pid=os.getpid())
    command = [sys.executable, "-c", "input()"]
    with subprocess.Popen(command, stdin=subprocess.PIPE, pass_fds=held) as child:
        unlock(held)
        with pytest.raises(LinkBusy):
            lock_ports(["/dev/x"], rig="second", folder="/runs/2", pid=1)
        child.kill()
    unlock(lock_ports(["/dev/x"], rig="second", folder="/runs/2", pid=1))


class _Entry(EntryPoint):
    thing: object = None

    def load(self) -> object:
        if isinstance(_Entry.thing, Exception):
            raise _Entry.thing
        return _Entry.thing


@pytest.mark.parametrize(
    ("thing", "words"),
    [
        (ImportError("no module named x"), "cannot be loaded: ImportError: no module named x"),
        (ZeroDivisionError("oops"), "cannot be loaded: ZeroDivisionError"),
        (42, "is a int, not a DriverFamily"),
        (DriverFamily("odd", 99, "", (), (), (), lambda spec: None, lambda d: {}), "contract 99, this rigd has"),  # type: ignore[arg-type, return-value]
    ],
)
def test_a_strangers_broken_driver_is_named(monkeypatch: pytest.MonkeyPatch, thing: object, words: str) -> None:
    monkeypatch.setattr(_Entry, "thing", thing)
    entry = _Entry("odd", "stranger:FAMILY", plugins.DRIVERS)
    monkeypatch.setattr(plugins, "_entries", lambda group: {"odd": entry})
    with pytest.raises(PluginError, match=words) as caught:
        plugins.driver_family("odd")
    assert "stranger:FAMILY" in str(caught.value)


def test_a_missing_driver_is_named_with_those_that_are_there() -> None:
    with pytest.raises(PluginError, match=r"'laser'.*syringe-pump"):
        plugins.driver_family("laser")
    assert plugins.driver_family("chiller").name == "chiller"


def test_the_files_of_a_run_load_from_its_folder_with_the_same_digests(tmp_path: Path) -> None:
    rig, recipe = CONFIGS / "rigs" / "two-pump-column.toml", CONFIGS / "recipes" / "demo-sweep.toml"
    folder = run_folder.make_run_folder(tmp_path / "runs", "demo-sweep")
    again = run_folder.make_run_folder(tmp_path / "runs", "demo-sweep")
    assert folder != again
    run_folder.freeze_files(folder, rig, recipe)
    before, after = load_pair(rig, recipe), load_pair(folder / run_folder.RIG, folder / run_folder.RECIPE)
    assert after.rig == before.rig
    assert after.recipe == before.recipe


def test_a_run_folder_that_cannot_be_made_is_said(tmp_path: Path) -> None:
    (tmp_path / "runs").touch()
    with pytest.raises(RigError, match="cannot make the run folder"):
        run_folder.make_run_folder(tmp_path / "runs", "x")
