"""The plan before the night against the rehearsal of it: duration and every liquid within 2 %, phase by phase shown.

The plan knows nothing of noise, heat of reaction and how long a signal really takes, and simulates none of them.
"""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

import pytest

from rigd import app
from rigd.logic import conduct
from rigd.logic.foresight import foresee
from rigd.model.events import EventKind
from rigd.runtime.dry import DryOptions

CONFIGS = Path(__file__).resolve().parents[2] / "configs"
SMALL_mL = 0.3
"""Half a filling's reserve; of a few millilitres 2 % are less than that."""

LONGEST = DryOptions(limit_ns=30_000 * 10**9)


@dataclass(frozen=True)
class Case:
    rig: str
    recipe: str
    changes: tuple[tuple[str, str], ...] = ()
    recipe_changes: tuple[tuple[str, str], ...] = ()
    volume: float = 0.02


CASES = {
    "demo": Case("two-pump-column", "demo-sweep"),
    "one-pump": Case("one-pump", "one-pump-sweep"),
    "single": Case("two-pump-single", "single-sweep"),
    "three-pump": Case("three-pump-two-columns", "three-pump-sweep"),
    "overnight": Case("two-pump-column", "overnight-sweep"),
    "large-syringes": Case("two-pump-column", "demo-sweep", (('stroke_volume = "5 mL"', 'stroke_volume = "10 mL"'),)),
    "small-syringes": Case("two-pump-column", "demo-sweep", (('stroke_volume = "5 mL"', 'stroke_volume = "2.5 mL"'),)),
    "slow-refill": Case("two-pump-column", "demo-sweep", (('refill_rate = "8 mL/min"', 'refill_rate = "5 mL/min"'),)),
    "weak-bath": Case("two-pump-column", "demo-sweep", (('id = "CH"\n', 'id = "CH"\nheating = "600 W"\n'),)),
    # One pump draws a filling more, against another try of the signal gate, or does not: 1.6 mL, at the end of a run.
    "fewer-points": Case("two-pump-column", "demo-sweep", (), (("count = 6", "count = 3"),), volume=0.13),
    "slower": Case("two-pump-column", "demo-sweep", (), (('from = "0.8 mL/min", to = "4 mL/min"',
                                                          'from = "0.5 mL/min", to = "2 mL/min"'),)),
    "long-way": Case("two-pump-column", "demo-sweep", (('to = "V-C"\nbore = "0.5 mm"\nlength = "200 mm"',
                                                        'to = "V-C"\nbore = "0.5 mm"\nlength = "4 m"'),)),
    "lopsided": Case("two-pump-column", "demo-sweep", (), (("PU-A = 1, PU-B = 1", "PU-A = 2, PU-B = 1"),)),
    # Two pumps once changed over in turns here, each time before the other had been quiet for an exchange, without end.
    "large-fractions": Case("two-pump-column", "demo-sweep", (), (('volume = "0.5 mL"', 'volume = "2 mL"'),)),
}  # fmt: skip


def written(case: Case, folder: Path) -> tuple[Path, Path]:
    """Copies of the example files with the changes of the case, each of which must be there to be changed."""
    rig = (CONFIGS / "rigs" / f"{case.rig}.toml").read_text()
    recipe = (CONFIGS / "recipes" / f"{case.recipe}.toml").read_text()
    for old, new in case.changes:
        assert old in rig, old
        rig = rig.replace(old, new)
    for old, new in case.recipe_changes:
        assert old in recipe, old
        recipe = recipe.replace(old, new)
    for name, text in (("rigs", rig), ("recipes", recipe)):
        (folder / name).mkdir()
        (folder / name / "file.toml").write_text(text)
    (folder / "chemistry").symlink_to(CONFIGS / "chemistry")
    return folder / "rigs" / "file.toml", folder / "recipes" / "file.toml"


@pytest.mark.timeout(180)
@pytest.mark.parametrize("name", [pytest.param(n, marks=[] if n == "demo" else [pytest.mark.slow]) for n in CASES])
def test_the_plan_is_within_two_percent(name: str, tmp_path: Path) -> None:
    case = CASES[name]
    done = app.dry_run(*written(case, tmp_path), app.DrySettings(options=LONGEST))
    found, run = foresee(done.program), done.result
    assert run.outcome == "done"
    assert not found.waits_for
    used = dict(run.state.protect.ledger.used)
    starts_s = [e.t_ns / 1e9 for e in run.events if e.kind is EventKind.PHASE and not e.fields["step"]]
    lengths_s = [end - start for start, end in zip(starts_s, [*starts_s[1:], run.end_ns / 1e9], strict=True)]
    table = "\n".join(
        f"{row.id:24} plan {row.duration_s:8.1f} s  rehearsed {length_s:8.1f} s"
        for row, length_s in zip(found.stretches, lengths_s, strict=True)
    )
    assert found.duration_s == pytest.approx(run.end_ns / 1e9, rel=0.02), table
    for liquid, volume_mL in used.items():
        assert found.used_mL[liquid] == pytest.approx(volume_mL, rel=case.volume, abs=SMALL_mL), f"{liquid}\n{table}"
    assert sum(point.collected_mL for point in found.points) == pytest.approx(
        sum(point.collected_mL for point in conduct.points(run.state.conduct)), rel=0.02
    )
