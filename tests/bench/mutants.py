"""Mutation testing of the modules that decide over a stop: ``python tests/bench/mutants.py [MODULE ...] [--all]``.

Each mutant changes one thing (a comparison, a Boolean, a number, a sign, a condition, a statement left out) in one
module; a child process loads the changed module in place of the real one and runs the tests named for it until the
first failure. A mutant that no test notices survives. Not changed: texts for people, annotations, assertions,
decorators. Survivors that cannot be noticed are listed with the reason in ``mutants_excused.csv`` beside this file;
the score counts killed ones over all that are not excused.
"""

from __future__ import annotations

import argparse
import ast
import copy
import csv
import importlib.abc
import importlib.util
import json
import os
import signal
import sys
import time
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from pathlib import Path

ROOT = Path(__file__).resolve().parents[2]
EXCUSED = Path(__file__).with_name("mutants_excused.csv")
TIMEOUT_S = 90
WORKERS = 2

ALARMS = ("test_reference_tables", "test_alarm_flags", "test_alarms_and_bypass", "test_core_properties")
LOCKS = (
    "test_reference_tables",
    "test_interlock_details",
    "test_interlock_partners",
    "test_alarms_and_bypass",
    "test_scan_trips",
    "test_permit_and_proof",
    "test_core_properties",
)
SUBJECTS = {
    "rigd.logic.protect.alarm_core": ALARMS,
    "rigd.logic.protect.alarm_overlay": ALARMS,
    "rigd.logic.protect.alarms": ALARMS,
    "rigd.logic.protect.latch": LOCKS,
    "rigd.logic.protect.voting": LOCKS,
    "rigd.logic.protect.interlock_vote": LOCKS,
    "rigd.logic.protect.interlocks": LOCKS,
    "rigd.logic.protect.bypass": ("test_interlock_details", "test_alarms_and_bypass", "test_core_properties"),
    "rigd.logic.arbitration": (
        "test_arbitration",
        "test_arbitration_details",
        "test_scan_trips",
        "test_quench",
        "test_conduct_fills",
    ),
}
"""Module -> test files of tests/logic that answer for it."""


@dataclass(frozen=True, slots=True)
class Mutant:
    """One change: number of the site in its module, where it is and what was done."""

    module: str
    site: int
    line: int
    what: str
    source: str
    within: str = ""

    @property
    def name(self) -> str:
        """How it is called in the list of excused ones: function and line, so that moving it changes nothing."""
        return f"{self.within}: {self.source} -> {self.what}"


COMPARE: dict[type[ast.cmpop], type[ast.cmpop]] = {
    ast.Lt: ast.LtE,
    ast.LtE: ast.Lt,
    ast.Gt: ast.GtE,
    ast.GtE: ast.Gt,
    ast.Eq: ast.NotEq,
    ast.NotEq: ast.Eq,
    ast.Is: ast.IsNot,
    ast.IsNot: ast.Is,
    ast.In: ast.NotIn,
    ast.NotIn: ast.In,
}
ARITHMETIC: dict[type[ast.operator], type[ast.operator]] = {
    ast.Add: ast.Sub,
    ast.Sub: ast.Add,
    ast.Mult: ast.Div,
    ast.Div: ast.Mult,
    ast.BitOr: ast.BitAnd,
    ast.BitAnd: ast.BitOr,
    ast.LShift: ast.RShift,
}
CALLS = {"min": "max", "max": "min", "any": "all", "all": "any"}


class Changer(ast.NodeTransformer):
    """Counts the places that can be changed; changes the one with the number ``wanted``."""

    def __init__(self, wanted: int = -1) -> None:
        self.wanted, self.count = wanted, 0
        self.sites: list[tuple[int, str, str]] = []
        self._within: list[str] = []

    def _here(self, node: ast.AST, what: str) -> bool:
        self.sites.append((getattr(node, "lineno", 0), what, ".".join(self._within)))
        self.count += 1
        return self.count - 1 == self.wanted

    def visit_Assert(self, node: ast.Assert) -> ast.AST:
        return node

    def visit_AnnAssign(self, node: ast.AnnAssign) -> ast.AST:
        if node.value is not None:
            node.value = self.visit(node.value)
        return node

    def visit_FunctionDef(self, node: ast.FunctionDef) -> ast.AST:
        self._within.append(node.name)
        node.args.defaults = [self.visit(value) for value in node.args.defaults]
        node.args.kw_defaults = [None if value is None else self.visit(value) for value in node.args.kw_defaults]
        node.body = self._body(node.body)
        self._within.pop()
        return node

    def visit_ClassDef(self, node: ast.ClassDef) -> ast.AST:
        self._within.append(node.name)
        node.body = self._body(node.body)
        self._within.pop()
        return node

    def visit_If(self, node: ast.If) -> ast.AST:
        if isinstance(node.test, ast.Name) and node.test.id == "TYPE_CHECKING":
            return node
        node.test = self._condition(node.test)
        node.body, node.orelse = self._body(node.body), self._body(node.orelse)
        return node

    def visit_IfExp(self, node: ast.IfExp) -> ast.AST:
        node.test = self._condition(node.test)
        node.body, node.orelse = self.visit(node.body), self.visit(node.orelse)
        return node

    def _condition(self, test: ast.expr) -> ast.expr:
        if not isinstance(test, ast.Compare | ast.UnaryOp) and self._here(test, "condition turned round"):
            return ast.UnaryOp(ast.Not(), test)
        found = self.visit(test)
        assert isinstance(found, ast.expr)
        return found

    def _body(self, statements: list[ast.stmt]) -> list[ast.stmt]:
        found: list[ast.stmt] = []
        for statement in statements:
            if _is_text(statement):
                found.append(statement)
            elif isinstance(statement, ast.Expr | ast.AugAssign) and self._here(statement, "statement left out"):
                found.append(ast.Pass())
            else:
                found.append(self.visit(statement))
        return found

    def visit_Compare(self, node: ast.Compare) -> ast.AST:
        self.generic_visit(node)
        for index, op in enumerate(node.ops):
            other = COMPARE[type(op)]
            if self._here(node, f"{type(op).__name__} made {other.__name__}"):
                node.ops[index] = other()
        return node

    def visit_BoolOp(self, node: ast.BoolOp) -> ast.AST:
        self.generic_visit(node)
        other: ast.boolop = ast.Or() if isinstance(node.op, ast.And) else ast.And()
        if self._here(node, f"{type(node.op).__name__} made {type(other).__name__}"):
            node.op = other
        return node

    def visit_UnaryOp(self, node: ast.UnaryOp) -> ast.AST:
        self.generic_visit(node)
        if isinstance(node.op, ast.Not | ast.USub) and self._here(node, f"{type(node.op).__name__} left out"):
            return node.operand
        return node

    def visit_BinOp(self, node: ast.BinOp) -> ast.AST:
        self.generic_visit(node)
        other = ARITHMETIC.get(type(node.op))
        if other is not None and self._here(node, f"{type(node.op).__name__} made {other.__name__}"):
            node.op = other()
        return node

    def visit_Constant(self, node: ast.Constant) -> ast.AST:
        if isinstance(node.value, bool):
            if self._here(node, f"{node.value} made {not node.value}"):
                return ast.copy_location(ast.Constant(not node.value), node)
        elif isinstance(node.value, int | float) and self._here(node, f"{node.value} made {node.value + 1}"):
            return ast.copy_location(ast.Constant(node.value + 1), node)
        return node

    def visit_Call(self, node: ast.Call) -> ast.AST:
        self.generic_visit(node)
        other = CALLS.get(node.func.id) if isinstance(node.func, ast.Name) else None
        if other is not None and self._here(node, f"{ast.unparse(node.func)} made {other}"):
            node.func = ast.Name(other, ast.Load())
        return node

    def visit_JoinedStr(self, node: ast.JoinedStr) -> ast.AST:
        return node


def _is_text(statement: ast.stmt) -> bool:
    return isinstance(statement, ast.Expr) and isinstance(statement.value, ast.Constant)


def source_of(module: str) -> str:
    """The text of a module."""
    return (ROOT / (module.replace(".", "/") + ".py")).read_text(encoding="utf-8")


def mutants_of(module: str) -> list[Mutant]:
    """All mutants of a module."""
    text = source_of(module)
    changer = Changer()
    changer.visit(ast.parse(text))
    lines = text.splitlines()
    return [
        Mutant(module, number, line, what, lines[line - 1].strip(), within)
        for number, (line, what, within) in enumerate(changer.sites)
    ]


class Substitute(importlib.abc.MetaPathFinder, importlib.abc.Loader):
    """Loads a changed module in place of the real one."""

    def __init__(self, module: str, tree: ast.Module) -> None:
        self._module, self._tree = module, tree

    def find_spec(self, fullname: str, path: object, target: object = None) -> importlib.machinery.ModuleSpec | None:
        if fullname != self._module:
            return None
        origin = str(ROOT / (fullname.replace(".", "/") + ".py"))
        return importlib.util.spec_from_file_location(fullname, origin, loader=self)

    def create_module(self, spec: object) -> None:
        return None

    def exec_module(self, module: object) -> None:
        vars(module)["__file__"] = vars(module).get("__file__", self._module)
        exec(compile(self._tree, f"<mutant of {self._module}>", "exec"), vars(module))


def run_tests(mutant: Mutant | None, tests: Sequence[str]) -> int:
    """In a child: 0 when no test noticed (or there is no mutant and all pass)."""
    import pytest

    if mutant is not None:
        changer = Changer(mutant.site)
        tree = changer.visit(copy.deepcopy(ast.parse(source_of(mutant.module))))
        sys.meta_path.insert(0, Substitute(mutant.module, ast.fix_missing_locations(tree)))
    files = [str(path) for name in tests if (path := ROOT / "tests/logic" / f"{name}.py").is_file()]
    os.chdir(ROOT)
    return int(
        pytest.main(["-x", "-q", "--no-header", "--tb=no", "-p", "no:cacheprovider", "-p", "no:randomly", *files])
    )


def start(mutant: Mutant | None, tests: Sequence[str]) -> int:
    """Fork a child for a mutant; returns its process id. The parent has imported what takes long, but not the core."""
    pid = os.fork()
    if pid:
        return pid
    null = os.open(os.devnull, os.O_WRONLY)
    os.dup2(null, 1)
    os.dup2(null, 2)
    signal.alarm(TIMEOUT_S)  # one that hangs is killed, and counts as noticed
    code = 1
    try:
        code = run_tests(mutant, tests)
    except BaseException:  # noqa: BLE001 - whatever a mutant breaks, it is noticed
        code = 1
    os._exit(code if code < 256 else 1)


def survivors(mutants: Sequence[Mutant], progress: bool) -> Iterator[Mutant]:
    """Run all, ``WORKERS`` at a time; yields those that no test noticed."""
    waiting, running = list(reversed(mutants)), {}
    done = 0
    while waiting or running:
        while waiting and len(running) < WORKERS:
            mutant = waiting.pop()
            running[start(mutant, SUBJECTS[mutant.module])] = mutant
        pid, status = os.wait()
        mutant = running.pop(pid)
        done += 1
        if progress and done % 25 == 0:
            print(f"{done} of {len(mutants)}", file=sys.stderr, flush=True)
        if status == 0:
            yield mutant


def excused() -> dict[tuple[str, str], str]:
    """(module, mutant) -> why it cannot be noticed."""
    if not EXCUSED.is_file():
        return {}
    with EXCUSED.open(encoding="utf-8") as file:
        return {(row["module"], row["mutant"]): row["why"] for row in csv.DictReader(file)}


def main() -> int:
    """Exit 0 when the score holds."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("modules", nargs="*", help="last parts of module names; all if none is given")
    parser.add_argument("--least", type=float, default=0.95, help="score that must be reached")
    parser.add_argument("--json", action="store_true")
    given = parser.parse_args()
    chosen = [module for module in SUBJECTS if not given.modules or module.rpartition(".")[2] in given.modules]
    sys.path[:0] = [str(ROOT), str(ROOT / "tests")]
    import numpy as np  # noqa: F401 - imported once for all children
    import pytest  # noqa: F401

    began_s = time.monotonic()
    known, report, left = excused(), {}, []
    for module in chosen:
        mutants = mutants_of(module)
        if not list(survivors([Mutant(module, len(mutants), 0, "nothing", "")], progress=False)):
            sys.exit(f"{module}: the tests fail without any change; nothing can be said about mutants")
        found = list(survivors(mutants, progress=not given.json))
        open_ones = [one for one in found if (module, one.name) not in known]
        counted = len(mutants) - (len(found) - len(open_ones))
        report[module] = {"mutants": len(mutants), "survived": len(found), "excused": len(found) - len(open_ones),
                          "score": round((counted - len(open_ones)) / counted, 4)}  # fmt: skip
        left += open_ones
        print(f"{module}: {report[module]}", file=sys.stderr, flush=True)
        for one in open_ones:
            print(f"  {one.line}: {one.name}", file=sys.stderr, flush=True)
    total = sum(int(one["mutants"]) - int(one["excused"]) for one in report.values())
    score = (total - len(left)) / total
    if given.json:
        print(json.dumps({"score": score, "modules": report, "survivors": [one.name for one in left]}, indent=1))
    print(f"score {score:.1%} of {total} mutants in {time.monotonic() - began_s:.0f} s", file=sys.stderr)
    return 0 if score >= given.least else 1


if __name__ == "__main__":
    sys.exit(main())
