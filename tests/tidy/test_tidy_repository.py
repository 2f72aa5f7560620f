"""The repository keeps its own rules: small files, words of the house, no path of a machine, nothing hidden."""

from __future__ import annotations

import ast
import re
import subprocess
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parents[2]
LINES_MAX = 500
FUNCTION_MAX = 60
TEST_FUNCTION_MAX = 80
PRODUCT_ROOMS = ("rigd", "drivers", "sim")
DOCUMENTED = ("rigd/model", "rigd/logic", "rigd/ports", "sim/rigd_sim/physics")


def tracked(*suffixes: str) -> list[Path]:
    """Files that git tracks (or would), by ending."""
    command = ["git", "ls-files", "--cached", "--others", "--exclude-standard"]
    names = subprocess.run(command, cwd=ROOT, capture_output=True, text=True, check=True).stdout.split("\n")
    return [ROOT / name for name in names if name.endswith(suffixes) and (ROOT / name).is_file()]


def relative(path: Path) -> str:
    return str(path.relative_to(ROOT))


PYTHON = tracked(".py")
TEXT = tracked(".py", ".md", ".toml", ".yml", ".txt", ".csv", ".html", "Makefile", "run", ".j2", ".service")


def test_files_are_found() -> None:
    assert len(PYTHON) > 50


@pytest.mark.parametrize("path", PYTHON, ids=relative)
def test_file_is_short_and_opens_with_its_purpose(path: Path) -> None:
    text = path.read_text()
    assert len(text.splitlines()) <= LINES_MAX, "split this file"
    assert ast.get_docstring(ast.parse(text)), "say in a docstring what this file is for"


@pytest.mark.parametrize("path", PYTHON, ids=relative)
def test_functions_are_short(path: Path) -> None:
    limit = TEST_FUNCTION_MAX if relative(path).startswith("tests/") else FUNCTION_MAX
    for node in ast.walk(ast.parse(path.read_text())):
        if isinstance(node, ast.FunctionDef | ast.AsyncFunctionDef):
            body = node.body[1:] if ast.get_docstring(node) else node.body
            if body:
                length = (body[-1].end_lineno or 0) - body[0].lineno + 1
                assert length <= limit, f"{node.name} at line {node.lineno} has {length} lines"


@pytest.mark.parametrize("path", [p for p in PYTHON if relative(p).startswith(DOCUMENTED)], ids=relative)
def test_public_names_are_documented(path: Path) -> None:
    for node in ast.parse(path.read_text()).body:
        if isinstance(node, ast.FunctionDef | ast.ClassDef) and not node.name.startswith("_"):
            assert ast.get_docstring(node), f"{node.name} at line {node.lineno} has no docstring"


BANNED = {
    r"(?<![\w.])/(?:work|farm|root|home)/": "a path of one machine",
    r"\b(?:files|registry|deb|pypi)\.[a-z]+\.org/": "a registry's host name",
    r"\bemergency[- ]stop\b": "a software stop is a 'stop'",
    r"\b(?:fail-safe|safety-rated|SIL ?[1-4])\b": "a claim that is not ours to make",
    r"\.\./shared": "the repository stands alone",
    r"(?i)\bfollow-up session\b|\bAI assistant\b|\blanguage model\b": "how it was made is not part of it",
}


@pytest.mark.parametrize("path", [p for p in TEXT if p.name != Path(__file__).name], ids=relative)
def test_words(path: Path) -> None:
    for number, line in enumerate(path.read_text().splitlines(), 1):
        for pattern, why in BANNED.items():
            found = re.search(pattern, line)
            allowed = found and re.search(r"(?i)\b(?:no|not|never|claims? none|hardware|hard-wired)\b", line)
            assert not found or (allowed and "claim" in why) or (allowed and "stop" in why), (
                f"line {number}: {why}: {line}"
            )


def test_test_files_have_names_of_their_own() -> None:
    names = [path.name for path in PYTHON if relative(path).startswith("tests/") and path.name != "conftest.py"]
    assert sorted(names) == sorted(set(names))


def test_top_level_holds_what_was_agreed() -> None:
    allowed = {
        "README.md", "DEVELOPERS.md", "LICENSE", "Makefile", "pyproject.toml", "requirements.lock", ".gitignore",
        ".ci", "rigd", "drivers", "sim", "tests", "configs", ".readme",
    }  # fmt: skip
    found = {relative(path).split("/")[0] for path in tracked("")}
    assert found <= allowed, found - allowed
