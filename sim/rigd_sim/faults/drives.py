"""Pumps, valves and baths that do not do what they are told."""

from __future__ import annotations

from rigd_sim.faults import targets
from rigd_sim.faults.build import effect
from rigd_sim.physics.constants import ML_M3
from rigd_sim.plant.ailments import Situation
from rigd_sim.plant.levers import BathLever, Levers, PumpLever, ValveLever


def _pump(levers: Levers, situation: Situation) -> PumpLever:
    return levers.pump(situation.fault.target)


def _valve(levers: Levers, situation: Situation) -> ValveLever:
    return levers.valve(situation.fault.target)


def _bath(levers: Levers, situation: Situation) -> BathLever:
    return levers.bath(situation.fault.target)


def _stall(levers: Levers, situation: Situation) -> None:
    _pump(levers, situation).stall = True


def _slip(levers: Levers, situation: Situation) -> None:
    _pump(levers, situation).gain *= 1.0 - situation.fault.magnitude


def _bore(levers: Levers, situation: Situation) -> None:
    _pump(levers, situation).gain *= situation.fault.magnitude**2


def _deaf_stop(levers: Levers, situation: Situation) -> None:
    _pump(levers, situation).deaf_stop = True


def _deaf(levers: Levers, situation: Situation) -> None:
    _pump(levers, situation).deaf = True


def _ripple(levers: Levers, situation: Situation) -> None:
    _pump(levers, situation).ripple = situation.fault.magnitude


def _backlash(levers: Levers, situation: Situation) -> None:
    _pump(levers, situation).slack = situation.fault.magnitude * ML_M3


def _no_draw(levers: Levers, situation: Situation) -> None:
    _pump(levers, situation).no_draw = True


def _draws_air(levers: Levers, situation: Situation) -> None:
    _pump(levers, situation).air_share = situation.fault.magnitude


def _stuck(levers: Levers, situation: Situation) -> None:
    _valve(levers, situation).stuck = True


def _lost(levers: Levers, situation: Situation) -> None:
    _valve(levers, situation).lost = True


def _liar(levers: Levers, situation: Situation) -> None:
    _valve(levers, situation).liar = True


def _cross(levers: Levers, situation: Situation) -> None:
    _valve(levers, situation).cross = situation.fault.magnitude


def _slow(levers: Levers, situation: Situation) -> None:
    _valve(levers, situation).slow = situation.fault.magnitude


def _no_circulation(levers: Levers, situation: Situation) -> None:
    _bath(levers, situation).pump_dead = True


def _hidden_no_circulation(levers: Levers, situation: Situation) -> None:
    bath = _bath(levers, situation)
    bath.pump_dead = bath.status_lies = True


def _no_cooling(levers: Levers, situation: Situation) -> None:
    _bath(levers, situation).cooling = 1.0 - situation.fault.magnitude


def _no_heating(levers: Levers, situation: Situation) -> None:
    _bath(levers, situation).heating = 1.0 - situation.fault.magnitude


def _full_heat(levers: Levers, situation: Situation) -> None:
    _bath(levers, situation).full_heat = True


def _bath_offset(levers: Levers, situation: Situation) -> None:
    _bath(levers, situation).offset_K = situation.fault.magnitude


def _restart(levers: Levers, situation: Situation) -> None:
    levers.restarted.add(situation.fault.target)


def _refuse(levers: Levers, situation: Situation) -> None:
    levers.refusing.add(situation.fault.target)


def _silent(levers: Levers, situation: Situation) -> None:
    levers.silent.add(situation.fault.target)


NONE = "not used"

EFFECTS = (
    effect("stall", "motor stops", targets.pumps, "pump", NONE, _stall,
           "state stalled, pressure and flow decay", "H8"),
    effect("slip", "lost steps or a worn seal", targets.pumps, "pump", "share lost, 0 to 1", _slip,
           "counter runs on, pressure, flow and collected volume are short", "H8"),
    effect("wrong-bore", "another syringe than declared", targets.pumps, "pump", "true bore over declared bore", _bore,
           "all volumes off by its square", "H24"),
    effect("ignores-stop", "says ok to stop and goes on", targets.pumps, "pump", NONE, _deaf_stop,
           "flow and counter go on after a stop", "H8 H42"),
    effect("ignores-orders", "says ok and does nothing", targets.pumps, "pump", NONE, _deaf,
           "flow read back is not the one ordered", "H8 H42"),
    effect("ripple", "worn or crooked screw", targets.pumps, "pump", "depth, share of flow", _ripple,
           "pressure waves with the period of one screw turn", "H7"),
    effect("backlash", "play after a refill or change-over", targets.pumps, "pump", "volume [mL]", _backlash,
           "flow and pressure dip after each change-over", "H10"),
    effect("refill-fails", "inlet valve does not turn", targets.pumps, "pump", NONE, _no_draw,
           "fill time is right, then no flow and no pressure", "H10"),
    effect("draws-air", "suction side leaks air", targets.pumps, "pump", "share of air, 0 to 1", _draws_air,
           "pressure slow to rise after a refill, spectrum spikes", "H7 H10"),
    effect("valve-stuck", "does not move", targets.valves, "valve", NONE, _stuck,
           "position stays, feedback says so", "H12 H14"),
    effect("valve-lost", "position unknown, port as it was", targets.valves, "valve", NONE, _lost,
           "position reads lost", "H12"),
    effect("valve-lies", "says it moved and did not", targets.valves, "valve", NONE, _liar,
           "feedback right, composition or pressure wrong", "H12 H14"),
    effect("valve-leaks", "leaks from port to port", targets.valves, "valve", "share of an open port, 0 to 1", _cross,
           "reagent shows in solvent steps", "H13 H14"),
    effect("valve-slow", "takes long to move", targets.valves, "valve", "factor on travel time", _slow,
           "position moving for long; dead-head while shut", "H12"),
    effect("no-circulation", "circulation pump dead", targets.chillers, "chiller", NONE, _no_circulation,
           "circulating 0, jacket and bed part from the bath", "H15"),
    effect("hidden-no-circulation", "circulation dead, status says running", targets.chillers, "chiller", NONE,
           _hidden_no_circulation, "bath looks fine, jacket and bed part from it", "H15"),
    effect("no-cooling", "compressor weak or dead", targets.chillers, "chiller", "share lost, 0 to 1", _no_cooling,
           "bath drifts up towards the room or does not cool", "H16"),
    effect("no-heating", "heater weak or dead", targets.chillers, "chiller", "share lost, 0 to 1", _no_heating,
           "bath drifts down, conversion falls", "H39"),
    effect("full-heat", "heater relay stuck on", targets.chillers, "chiller", NONE, _full_heat,
           "bath, jacket and bed rise without end", "H18"),
    effect("bath-offset", "bath sensor wrong", targets.chillers, "chiller", "true minus shown [K]", _bath_offset,
           "bath reads its set-point, jacket and bed part from it by the offset", "H15 H24"),
    effect("restart", "loses power once", targets.units, "pump, valve or chiller", NONE, _restart,
           "pump at rest and counter 0; valve at rest; chiller at its default set-point, off", "H17 H32 H33"),
    effect("refuses", "refuses every order", targets.units, "pump, valve or chiller", NONE, _refuse,
           "orders come back refused", "H40 H42"),
    effect("silent", "does not answer", targets.devices, "device", NONE, _silent,
           "every channel of the device bad, orders fail", "H25 H33"),
)  # fmt: skip
