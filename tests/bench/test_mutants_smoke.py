"""The mutation tester itself: finds places to change, notices changes, and does not notice what is none."""

from __future__ import annotations

import os
import subprocess
import sys
from pathlib import Path

import pytest
from bench.mutants import SUBJECTS, excused, mutants_of

ROOT = Path(__file__).resolve().parents[2]


@pytest.mark.parametrize("module", SUBJECTS)
def test_every_module_has_mutants_with_names_of_their_own_line(module: str) -> None:
    found = mutants_of(module)
    assert found
    assert all(mutant.line and mutant.source for mutant in found)


def test_the_tests_that_answer_for_a_module_are_there() -> None:
    names = {name for tests in SUBJECTS.values() for name in tests}
    assert [name for name in sorted(names) if not (ROOT / "tests/logic" / f"{name}.py").is_file()] == []


def test_what_is_excused_is_still_there_and_says_why() -> None:
    named = {(module, mutant.name) for module in SUBJECTS for mutant in mutants_of(module)}
    assert set(excused()) <= named
    assert all(excused().values())


@pytest.mark.slow
@pytest.mark.timeout(300)
def test_every_mutant_of_the_voting_is_noticed() -> None:
    command = [sys.executable, str(ROOT / "tests/bench/mutants.py"), "voting", "--least", "1"]
    done = subprocess.run(command, capture_output=True, text=True, env={**os.environ}, check=False)
    assert done.returncode == 0, done.stderr
