"""What a stranger does: begin a package, install it in an environment of its own, run the battery, name it in a rig."""

from __future__ import annotations

import json
import os
import re
import shutil
import site
import subprocess
import sys
import venv
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parents[2]
NAME = "vial-valve"


def run(*words: str | Path, cwd: Path) -> subprocess.CompletedProcess[str]:
    plain = {name: value for name, value in os.environ.items() if not name.startswith(("PYTHON", "PIP_", "PYTEST"))}
    return subprocess.run(
        [str(word) for word in words], cwd=cwd, env=plain, capture_output=True, text=True, check=False
    )


@pytest.fixture(scope="module")
def installed(tmp_path_factory: pytest.TempPathFactory) -> tuple[Path, Path]:
    """(python of a fresh environment, folder of the package): nothing is downloaded; the libraries that rigd needs are
    those of this environment, by a path file, and rigd itself is built and installed as a wheel."""
    folder = tmp_path_factory.mktemp("stranger")
    venv.create(folder / "env", with_pip=False)
    python = folder / "env/bin/python"
    packages = next((folder / "env/lib").iterdir()) / "site-packages"
    (packages / "libraries.pth").write_text("\n".join(site.getsitepackages()) + "\n")
    pip = [python, "-m", "pip", "install", "-q", "--no-deps", "--no-build-isolation", "--no-index"]
    made = [
        run(*pip, ROOT, cwd=folder),
        run(folder / "env/bin/rigd", "driver", "new", NAME, cwd=folder),
        run(*pip, f"./{NAME}", cwd=folder),
    ]
    assert all(one.returncode == 0 for one in made), [one.stderr for one in made]
    return python, folder / NAME


@pytest.mark.slow
def test_it_passes_the_battery_with_one_line(installed: tuple[Path, Path]) -> None:
    python, project = installed
    shutil.rmtree(project / "src")  # what is tested is what was installed
    ran = run(python, "-m", "pytest", "-q", "-p", "no:cacheprovider", cwd=project)
    passed = re.search(r"(\d+) passed", ran.stdout)
    assert ran.returncode == 0, ran.stdout + ran.stderr
    assert passed is not None
    assert int(passed[1]) >= 26


@pytest.mark.slow
def test_a_rig_that_names_it_is_checked_with_it(installed: tuple[Path, Path]) -> None:
    python, project = installed
    text = (ROOT / "configs/rigs/two-pump-column.toml").read_text()
    text = text.replace("../chemistry/", f"{ROOT}/configs/chemistry/")
    ours = 'id = "valve-c"\ndriver = "selector-valve"\ndialect = "bracket"\nlink = "bus-1"\naddress = "23"\n'
    theirs = f'id = "valve-c"\ndriver = "{NAME}"\ndialect = "plain"\nlink = "valve-port"\n'
    assert ours in text
    text = text.replace(ours, theirs) + '\n[[links]]\nid = "valve-port"\nport = "/dev/ttyUSB7"\nbaud = "9600 baud"\n'
    check = [python.with_name("rigd"), "check", "--json"]
    (project / "rig.toml").write_text(text)
    good = run(*check, "rig.toml", cwd=project)
    assert json.loads(good.stdout)["fit"] is True, good.stdout
    (project / "wrong.toml").write_text(text.replace(theirs, theirs.replace('"plain"', '"morse"')))
    bad = run(*check, "wrong.toml", cwd=project)
    assert bad.returncode == 2
    assert "this driver speaks plain" in bad.stdout + bad.stderr
    without = run(Path(sys.executable).with_name("rigd"), *check[1:], "rig.toml", cwd=project)
    assert without.returncode == 2
    assert f"no plug-in '{NAME}'" in without.stdout + without.stderr
