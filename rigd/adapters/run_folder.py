"""The folder of one run: ``runs/<UTC stamp>-<recipe>/`` with frozen copies of the files that a person wrote.

The copies are called ``rig.toml``, ``chemistry.toml`` and ``recipe.toml`` and load by themselves: the rig's line that
names the chemistry file is made to name the copy. Nothing else is changed, and the digest of a rig leaves that
line out.
"""

from __future__ import annotations

import contextlib
import re
import tomllib
from collections.abc import Mapping
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

from rigd.model.errors import RigError

RIG, CHEMISTRY, RECIPE = "rig.toml", "chemistry.toml", "recipe.toml"
_CHEMISTRY_LINE = re.compile(r"^(\s*chemistry\s*=).*$", re.MULTILINE)


def make_run_folder(runs: Path, recipe_name: str) -> Path:
    """A new folder for a run that starts now; ``RigError`` when it cannot be made."""
    stamp = datetime.now(UTC).strftime("%Y%m%dT%H%M%SZ")
    for suffix in ("", *(f"-{number}" for number in range(2, 100))):
        folder = runs / f"{stamp}-{recipe_name}{suffix}"
        try:
            folder.mkdir(parents=True)
        except FileExistsError:
            continue
        except OSError as error:
            raise RigError(f"cannot make the run folder {folder}: {error.strerror}") from error
        return folder.resolve()
    raise RigError(f"there are a hundred runs called {stamp}-{recipe_name} already; wait a second")


def frozen_texts(rig_path: Path, recipe_path: Path) -> dict[str, str]:
    """The three files as the copies hold them, by the names of the copies. Raises ``OSError`` and ``RigError``."""
    rig_text = rig_path.read_text(encoding="utf-8")
    chemistry = rig_path.parent / tomllib.loads(rig_text)["chemistry"]
    frozen, lines = _CHEMISTRY_LINE.subn(rf'\1 "{CHEMISTRY}"', rig_text, count=1)
    if lines != 1:
        raise RigError(f'{rig_path}: write the chemistry file on a line of its own, as chemistry = "..."')
    texts = {CHEMISTRY: chemistry.read_text(encoding="utf-8"), RECIPE: recipe_path.read_text(encoding="utf-8")}
    texts |= _cards(rig_path.parent, tomllib.loads(rig_text))
    return {RIG: frozen, **texts}


def freeze_files(folder: Path, rig_path: Path, recipe_path: Path) -> None:
    """Copy rig, chemistry and recipe into the run folder so that the copies load by themselves."""
    try:
        write_texts(folder, frozen_texts(rig_path, recipe_path))
    except OSError as error:
        raise RigError(f"cannot copy the files of the run to {folder}: {error.strerror}") from error


def _cards(folder: Path, rig: Mapping[str, Any]) -> dict[str, str]:
    """Protocol cards beside the rig file, under the names that its devices use; those at absolute paths stay."""
    names = {str(device.get("options", {}).get("card", "")) for device in rig.get("devices", ())} - {""}
    near = [name for name in sorted(names) if not Path(name).is_absolute()]
    for name in near:
        if ".." in Path(name).parts:
            raise RigError(f"card {name!r}: keep cards beside or below the rig file, so that a run can keep its copy")
    return {name: (folder / name).read_text(encoding="utf-8") for name in near}


def kept_texts(folder: Path) -> dict[str, str]:
    """All frozen files of a run folder by their names in it, cards too; those that cannot be read are left out."""
    found = {}
    for path in sorted(folder.rglob("*.toml")):
        with contextlib.suppress(OSError, ValueError):
            found[path.relative_to(folder).as_posix()] = path.read_text(encoding="utf-8")
    return found


def texts_in(meta: Mapping[str, str]) -> dict[str, str]:
    """The frozen files among the facts of a journal; names that would lead out of a folder are left out."""
    names = [name for name in meta if name.endswith(".toml")]
    return {name: meta[name] for name in names if not Path(name).is_absolute() and ".." not in Path(name).parts}


def write_texts(folder: Path, texts: Mapping[str, str]) -> None:
    """Write frozen files into a folder. Raises ``OSError``."""
    for name, text in texts.items():
        (folder / name).parent.mkdir(parents=True, exist_ok=True)
        (folder / name).write_text(text, encoding="utf-8")
