"""Control, guard and front killed, and control stopped for 30 s, at random moments of a live run; judged by the plant.

``python tests/scenarios/random_kills.py COUNT [SEED]`` runs COUNT of them, one after another, against one simulator at
20 times real time, and prints how long it took until no pump delivered. 200 take about half an hour.
"""

from __future__ import annotations

import json
import os
import random
import signal
import sys
import tempfile
import time
from pathlib import Path

sys.path.insert(0, str(Path(__file__).resolve().parents[1]))

from fakes.run_bench import CONFIGS, RECIPE, RIG, Bench, child_of, wait

LOWEST_RATING_BAR = 20.0
STOP_S = {"control": 1.0, "hung": 2.0, "guard": 1.0}
"""Wall time to no delivery: a hung control is noticed after 1 s without a ticket."""
SPAN_S = (1.0, 12.0)
"""When they strike, from the start of the command: start-up, priming, leak test, first points [wall]."""
EARS = '\n[[outside.alerts]]\nname = "hook"\nurl = "json://127.0.0.1:9/"\npriority_at_least = "high"\n'


def delivering(bench: Bench) -> bool:
    return any(value for name, value in bench.truth().items() if name.startswith("delivering:"))


def one(bench: Bench, victim: str, after_s: float) -> dict[str, object]:
    """One run: end or stop ``victim`` so long after the start; raises ``AssertionError`` when the rig goes on."""
    run = bench.start()
    moment_s = time.monotonic() + after_s
    wait(lambda: child_of(run.pid), 30)
    while time.monotonic() < moment_s and run.poll() is None:
        time.sleep(0.01)
    module = {"front": b"rigd.front"}.get(victim, b"rigd.app")
    pid = run.pid if victim == "guard" else child_of(run.pid, module)
    moved = delivering(bench)
    os.kill(pid, signal.SIGSTOP if victim == "hung" else signal.SIGKILL)
    took_s = 0.0
    if victim == "front":
        time.sleep(1.0)
        assert run.poll() is None, "control noticed that the front died"
        for _ in range(2):
            run.send_signal(signal.SIGINT)
            time.sleep(0.1)
    else:
        took_s = wait(lambda: not delivering(bench), 10)
        assert took_s <= STOP_S[victim], f"{victim}: {took_s:.2f} s until no pump delivered"
        if front := child_of(run.pid, b"rigd.front"):
            os.kill(front, signal.SIGKILL)  # it would try its last alerts for 10 s
    run.wait(40)
    wait(lambda: not delivering(bench), 5)
    peak_bar = max(value for name, value in bench.truth().items() if name.startswith("peak-pressure:"))
    assert peak_bar < LOWEST_RATING_BAR
    return {"victim": victim, "after_s": round(after_s, 2), "moved": moved, "took_s": round(took_s, 3)}


def play(count: int, seed: int, folder: Path, span_s: tuple[float, float] = SPAN_S) -> list[dict[str, object]]:
    """``count`` runs, the victims in turn, the moments by chance."""
    chance = random.Random(seed)
    rig = folder / "rig.toml"
    chemistry = CONFIGS / "chemistry" / "esterification.toml"
    rig.write_text(RIG.read_text().replace('"../chemistry/esterification.toml"', f'"{chemistry}"') + EARS)
    bench = Bench(folder, rig, RECIPE)
    try:
        wait((bench.meeting / "ports.json").exists, 90)
        found = []
        for number in range(count):
            victim = ("control", "hung", "guard", "front")[number % 4]
            found.append(one(bench, victim, chance.uniform(*span_s)))
            print(json.dumps(found[-1]), flush=True)
        return found
    finally:
        bench.close()


if __name__ == "__main__":
    with tempfile.TemporaryDirectory() as place:
        play(int(sys.argv[1]), int(sys.argv[2]) if len(sys.argv) > 2 else 1, Path(place))
