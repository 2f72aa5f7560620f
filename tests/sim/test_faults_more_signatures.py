"""What each of the less common faults shows against a healthy twin that does the same (numbers H1 to H42)."""

from __future__ import annotations

from collections.abc import Callable
from functools import cache
from pathlib import Path

import numpy as np
import pytest
from fakes.sim_rigs import S_NS
from fakes.sim_running import Shown, on, running, shown

from rigd.model.orders import Action
from rigd.ports.plant import FaultSpec
from rigd_sim.faults import fault_kinds
from rigd_sim.plant import RigPlant

Act = Callable[[RigPlant], None]
Judge = Callable[[Shown, Shown], bool]


def wait(seconds: float) -> Act:
    """Go on delivering."""
    return lambda plant: on(plant, seconds)


def stand(seconds: float) -> Act:
    """Stop both pumps and wait."""

    def act(plant: RigPlant) -> None:
        for name in plant.pumps:
            plant.tell(name, Action.STOP, 0.0)
        plant.advance(plant.now_ns + round(seconds * S_NS))

    return act


def refill_and_change(seconds: float) -> Act:
    """Let PU-A use up a syringe, fill that one, change over to what was drawn, deliver."""

    def act(plant: RigPlant) -> None:
        plant.advance(plant.now_ns + 660 * S_NS)
        plant.tell("PU-A", Action.FILL, 5.0)
        plant.advance(plant.now_ns + 45 * S_NS)
        plant.tell("PU-A", Action.SWAP, 0.0)
        plant.advance(plant.now_ns + round(seconds * S_NS))

    return act


def switch(seconds: float, position: float = 0.0) -> Act:
    """Turn V-C (0 = waste)."""

    def act(plant: RigPlant) -> None:
        plant.tell("V-C", Action.MOVE, position)
        plant.advance(plant.now_ns + round(seconds * S_NS))

    return act


def cool(seconds: float) -> Act:
    """Ask the bath for 10 degC."""

    def act(plant: RigPlant) -> None:
        plant.tell("CH", Action.SET_TEMPERATURE, 10.0)
        on(plant, seconds)

    return act


def faster(plant: RigPlant) -> None:
    """Ask PU-A for 0.9 mL/min."""
    plant.tell("PU-A", Action.DELIVER, 0.9)
    on(plant, 30.0)


WATCHED = {"pump-a": ("flow", "delivered"), "valve-c": ("position",), "chiller": ("bath", "circulating")}


def seen(plant: RigPlant) -> Shown:
    """Signals, truth, feedback, the swing of the last readings and figures of the spectrum."""
    state = shown(plant)
    for device, channels in WATCHED.items():
        for reading in plant.read(device, list(channels)):
            state[f"{device}.{reading.channel}"] = reading.value
    rows = []
    for _ in range(30):
        plant.advance(plant.now_ns + S_NS // 2)
        rows.append([r.value for r in plant.read("sensors", ["p1", "t1"])])
    swing = np.ptp(np.array(rows), axis=0)
    state["swing:PT-1"], state["swing:TT-1"] = float(swing[0]), float(swing[1])
    spectrum = plant.spectrum("ir")
    state["spectrum:max"], state["spectrum:min"] = max(spectrum.absorbance), min(spectrum.absorbance)
    state["spectrum:rough"] = float(np.abs(np.diff(spectrum.absorbance, n=2)).mean())
    state["spectrum:peak"] = float(np.argmax(spectrum.absorbance)) * spectrum.step_per_cm
    state["gas:flask"] = plant.contents.gas_share
    return state


def _outcome(plant: RigPlant, fault: FaultSpec | None, act: Act) -> Shown:
    if fault is not None:
        plant.inject(fault)
    act(plant)
    return seen(plant)


@cache
def twin(act: Act) -> Shown:
    """The same without a fault."""
    return _outcome(running(8.0), None, act)


W60, W600, S60, R60, C900, FASTER = wait(60.0), wait(600.0), stand(60.0), refill_and_change(60.0), cool(900.0), faster
SWITCH10 = switch(10.0)

CASES: list[tuple[str, str, float, Act, Judge]] = [
    ("collapse", "COL", 4.0, W60, lambda a, b: b["PT-1"] > a["PT-1"] + 0.02 and abs(b["PT-2"] - a["PT-2"]) < 0.05),
    ("backflow", "PU-A", 0.05, W60, lambda a, b: b["flow:L-A3"] < a["flow:L-A3"] - 0.05),
    ("backflow", "PU-A", 0.05, S60, lambda a, b: b["pressure:TEE"] < a["pressure:TEE"] - 0.2),
    ("outgassing", "COL", 0.5, W600, lambda a, b: abs(b["spectrum:max"] - a["spectrum:max"]) > 0.05),
    ("bottle-empty", "bottle-A", 1.0, refill_and_change(400.0),
     lambda a, b: b["gas:flask"] > 0.5 and abs(b["spectrum:max"] - a["spectrum:max"]) > 0.05),
    ("siphon", "bottle-A", 0.5, W60, lambda a, b: abs(b["pressure:PU-A.in"] - a["pressure:PU-A.in"] - 0.5) < 0.1),
    ("wrong-bore", "PU-A", 1.1, W60, lambda a, b: abs(b["flow:L-A3"] / a["flow:L-A3"] - 1.21) < 0.01),
    ("ignores-orders", "PU-A", 1.0, FASTER,
     lambda a, b: abs(b["pump-a.flow"] - 0.5) < 0.01 < abs(a["pump-a.flow"] - 0.5)),
    ("ripple", "PU-A", 0.8, wait(60.5), lambda a, b: b["swing:PT-1"] > 1.3 * a["swing:PT-1"]),
    ("backlash", "PU-A", 0.3, refill_and_change(10.0), lambda a, b: b["flow:L-A3"] < a["flow:L-A3"] - 0.2),
    ("refill-fails", "PU-A", 1.0, R60, lambda a, b: b["flow:L-A3"] < 0.1 < a["flow:L-A3"] and b["PT-1"] < a["PT-1"]),
    ("draws-air", "PU-A", 0.5, R60, lambda a, b: b["gas:flask"] > a["gas:flask"] + 0.2),
    ("valve-stuck", "V-C", 1.0, SWITCH10, lambda a, b: b["valve-c.position"] == 1.0 and a["valve-c.position"] == 0.0),
    ("valve-lost", "V-C", 1.0, W60, lambda a, b: b["valve-c.position"] != 1.0 == a["valve-c.position"]),
    ("valve-lies", "V-C", 1.0, SWITCH10, lambda a, b: b["valve-c.position"] == 0.0 and b["position:V-C"] == 1.0),
    ("valve-slow", "V-C", 20.0, SWITCH10, lambda a, b: b["PT-1"] > a["PT-1"] + 0.5 and b["position:V-C"] == -1.0),
    ("hidden-no-circulation", "CH", 1.0, W600,
     lambda a, b: b["TT-2"] < a["TT-2"] - 3 and b["chiller.circulating"] == 1.0 and abs(b["chiller.bath"] - 60) < 1),
    ("no-cooling", "CH", 1.0, C900, lambda a, b: b["temperature:CH"] > a["temperature:CH"] + 3),
    ("bath-offset", "CH", 3.0, W600,
     lambda a, b: abs(b["chiller.bath"] - 60) < 0.2 and abs(b["TT-2"] - a["TT-2"] - 3) < 0.5),
    ("gain", "PT-1", 1.5, W60, lambda a, b: abs(b["PT-1"] / a["PT-1"] - 1.5) < 0.05),
    ("noisy", "PT-1", 8.0, W60, lambda a, b: b["swing:PT-1"] > 4 * a["swing:PT-1"]),
    ("spikes", "PT-1", 2.0, W60, lambda a, b: b["swing:PT-1"] > a["swing:PT-1"] + 1.5),
    ("ir-drift", "IR", 1.0, W600, lambda a, b: b["spectrum:min"] > a["spectrum:min"] + 0.05),
    ("ir-film", "IR", 1.0, W600, lambda a, b: b["spectrum:max"] > a["spectrum:max"] + 0.02),
    ("ir-noise", "IR", 10.0, W60, lambda a, b: b["spectrum:rough"] > 1.3 * a["spectrum:rough"]),
    ("ir-shift", "IR", 8.0, W60, lambda a, b: abs(abs(b["spectrum:peak"] - a["spectrum:peak"]) - 8.0) < 4.1),
    ("ir-stray", "IR", 0.1, W60, lambda a, b: b["spectrum:max"] < a["spectrum:max"] - 0.02),
    ("deactivation", "COL", 3.0, W600, lambda a, b: b["conversion:COL"] < 0.9 * a["conversion:COL"]),
    ("too-active", "COL", 2.0, W600, lambda a, b: b["conversion:COL"] > 1.1 * a["conversion:COL"]),
    ("room", "room", -15.0, W600, lambda a, b: b["PT-1"] > a["PT-1"] + 0.005),
]  # fmt: skip


@pytest.mark.parametrize(
    ("kind", "target", "magnitude", "act", "judge"), CASES, ids=[f"{c[0]}-{i}" for i, c in enumerate(CASES)]
)
def test_fault_against_its_healthy_twin(kind: str, target: str, magnitude: float, act: Act, judge: Judge) -> None:
    """The signals that the table of kinds names, in the direction it names."""
    healthy = twin(act)
    ill = _outcome(running(8.0), FaultSpec(kind, target, magnitude=magnitude), act)
    moved = {k: (round(healthy[k], 4), round(ill[k], 4)) for k in healthy if abs(healthy[k] - ill[k]) > 1e-3}
    assert judge(healthy, ill), moved


def test_spectra_that_stand_still_are_the_same_number_for_number() -> None:
    """H23: a healthy cell has noise, so two spectra differ."""
    plant = running(4.0)
    first = plant.spectrum("ir").absorbance
    on(plant, 20.0)
    healthy = plant.spectrum("ir").absorbance
    assert healthy != first
    plant.inject(FaultSpec("ir-frozen", "IR"))
    on(plant, 60.0)
    frozen = plant.spectrum("ir").absorbance
    on(plant, 60.0)
    assert plant.spectrum("ir").absorbance == frozen


def test_a_unit_that_refuses_says_so() -> None:
    """H40, H42: each order comes back."""
    plant = running(1.0)
    for unit, action in (("PU-A", Action.STOP), ("V-C", Action.MOVE), ("CH", Action.CIRCULATE)):
        plant.inject(FaultSpec("refuses", unit))
        assert plant.tell(unit, action, 0.0) != ""


def test_every_kind_has_a_signature_test() -> None:
    """A kind without one would be a fault that nobody has looked at."""
    text = "".join(
        path.read_text(encoding="utf-8") for path in Path(__file__).parent.glob("test_faults_*signatures.py")
    )
    assert [kind.kind for kind in fault_kinds() if f'("{kind.kind}", ' not in text] == []
