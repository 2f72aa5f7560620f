"""Interlocks and alarms that every rig has: lost links, stalled pumps, valves that are not where they were told.

Stops and delays follow the cause-and-effect table of this project (tests/reference/cause_effect.csv: rows C09, C13,
C14, C19, C20, C21, C24, C25). A lost chiller is a quench and not a cut, because a bed that makes heat needs moving
solvent most when the cooling is gone.
"""

from __future__ import annotations

from collections.abc import Iterable

from rigd.config.table import ns
from rigd.model.devices import DeviceSpec, PumpState
from rigd.model.orders import Stop
from rigd.model.protection import Alarm, Condition, ConditionKind, Interlock, Priority
from rigd.model.rig import Chiller, Pump, RigDefinition, Valve

BUILT_IN_BASIS = "built in: an actuator in an unknown state is stopped (tests/reference/cause_effect.csv)"

CHILLER_LINK_S = 10.0
SETPOINT_K = 0.5
SETPOINT_S = 10.0
MISMATCH_S = 1.0
JOURNAL_S = 5.0


def built_in_interlocks(rig: RigDefinition, devices: Iterable[DeviceSpec]) -> tuple[Interlock, ...]:
    """The built-in interlocks of a rig; ``rig`` need not hold them or its devices yet."""
    known = tuple(devices)
    watched = _watched_devices(rig)
    found: list[Interlock] = []
    for device in known:
        if device.id in watched:
            found.append(_link(rig, device))
        found.append(_power(device))
    found += [_stall(pump.id) for pump in rig.pumps]
    found += [_mismatch(valve.id) for valve in rig.valves if valve.device]
    found += [_adrift(chiller.id) for chiller in rig.chillers if chiller.device]
    return (*found, *_FAULTS)


def built_in_alarms(rig: RigDefinition) -> tuple[Alarm, ...]:
    """One alarm with hold for each pump that has run empty; one for each pair of channels that disagree."""
    witnesses = [(lock, witness) for lock in rig.interlocks for witness in lock.witnesses]
    disagree = [_disagree(lock, witness) for lock, witness in witnesses]
    return (*disagree, *(_empty(pump) for pump in rig.pumps))


def _disagree(lock: Interlock, witness: Condition) -> Alarm:
    pair = f"{witness.tag}-{witness.reference}"
    return Alarm(
        id=f"DISAGREE-{lock.id}-{pair}",
        title=f"{witness.tag} and {witness.reference} disagree",
        condition=witness,
        priority=Priority.HIGH,
        action=f"Find out which of the two is wrong before {lock.id} has to do without it.",
        cause="one of two instruments is out of calibration, detached or blocked",
        consequence=f"{lock.id} believes the worse of them",
        on_delay_ns=lock.discord_ns,
        off_delay_ns=lock.clear_delay_ns,
    )


def _empty(pump: Pump) -> Alarm:
    return Alarm(
        id=f"EMPTY-{pump.id}",
        title=f"{pump.id} has no liquid left to deliver",
        condition=Condition(ConditionKind.EQUALS, f"{pump.id}.state", float(PumpState.EMPTY)),
        priority=Priority.HIGH,
        action=f"Look whether the bottle of {pump.id} is empty or its inlet line holds gas; refill, then resume.",
        cause="bottle empty, refill late or gas drawn in",
        consequence="the other pumps alone set the composition",
        hold=True,
    )


def _watched_devices(rig: RigDefinition) -> frozenset[str]:
    """Actuators, and devices that carry a tag of an interlock."""
    parts: tuple[Pump | Valve | Chiller, ...] = (*rig.pumps, *rig.valves, *rig.chillers)
    moving = {part.device for part in parts if part.device}
    tags = {name for lock in rig.interlocks for cause in lock.causes for name in (cause.tag, cause.reference)}
    carrying = {tag.device for tag in rig.tags if tag.id in tags}
    return frozenset(moving | carrying)


def _link(rig: RigDefinition, device: DeviceSpec) -> Interlock:
    chiller = any(chiller.device == device.id for chiller in rig.chillers)
    what = f"{device.unit} ({device.id})" if device.unit else device.id
    return Interlock(
        id=f"LINK-{device.id}",
        title=f"Link to {what} lost",
        causes=(Condition(ConditionKind.LINK, device.id),),
        stop=Stop.QUENCH if chiller else Stop.CUT,
        on_delay_ns=ns(CHILLER_LINK_S) if chiller else 0,
        consequence=f"{what} is neither seen nor controlled; it may keep doing what it was last told",
        response=f"Look at {what} itself first. Then check cable, port and power; reset when it answers again.",
        basis=BUILT_IN_BASIS,
        built_in=True,
    )


def _power(device: DeviceSpec) -> Interlock:
    what = f"{device.unit} ({device.id})" if device.unit else device.id
    return Interlock(
        id=f"POWER-{device.id}",
        title=f"{what} restarted or is another device",
        causes=(Condition(ConditionKind.POWER_CYCLED, device.id),),
        stop=Stop.CUT,
        consequence="settings of the device are lost or belong to another one",
        response=f"Check the power of {what} and that the right device hangs on the right cable; then reset.",
        basis=BUILT_IN_BASIS,
        built_in=True,
    )


def _stall(pump: str) -> Interlock:
    return Interlock(
        id=f"STALL-{pump}",
        title=f"{pump} met its force limit",
        causes=(Condition(ConditionKind.EQUALS, f"{pump}.state", float(PumpState.STALLED)),),
        stop=Stop.CUT,
        consequence="a blocked line under the full force of the pump, or no flow while the other pumps go on",
        response=f"Find what blocks {pump}: valve, line, frit. Release the pressure to waste before opening a fitting.",
        basis=BUILT_IN_BASIS,
        built_in=True,
    )


def _mismatch(valve: str) -> Interlock:
    return Interlock(
        id=f"MISMATCH-{valve}",
        title=f"{valve} is not where it was told to be",
        causes=(Condition(ConditionKind.MISMATCH, f"{valve}.position"),),
        stop=Stop.CUT,
        on_delay_ns=ns(MISMATCH_S),
        consequence="a pump runs against a closed port, or the wrong liquid reaches the bed",
        response=f"See by eye where {valve} stands. Release the pressure, free the valve, then reset.",
        basis=BUILT_IN_BASIS,
        built_in=True,
    )


def _adrift(chiller: str) -> Interlock:
    return Interlock(
        id=f"MISMATCH-{chiller}",
        title=f"{chiller} has another set-point than it was told",
        causes=(Condition(ConditionKind.MISMATCH, f"{chiller}.setpoint", SETPOINT_K),),
        stop=Stop.QUENCH,
        on_delay_ns=ns(SETPOINT_S),
        consequence="the bath goes to a temperature that nobody asked for, after a silent restart of the chiller",
        response=f"See by eye what {chiller} shows. Check its power and that nobody turned its knob; then reset.",
        basis=BUILT_IN_BASIS,
        built_in=True,
    )


def _fault(
    name: str, fault: str, title: str, stop: Stop, consequence: str, response: str, delay_s: float = 0.0
) -> Interlock:
    return Interlock(
        id=name,
        title=title,
        causes=(Condition(ConditionKind.FAULT, fault),),
        stop=stop,
        on_delay_ns=ns(delay_s),
        consequence=consequence,
        response=response,
        basis="built in (tests/reference/cause_effect.csv)",
        built_in=True,
    )


_FAULTS = (
    _fault(
        "STOP-REQUEST", "STOP-REQUEST", "Stop asked for by a person", Stop.QUENCH,
        "the run goes on although somebody wants it ended",
        "Let the flush end, if one runs; then look at the rig before a new start.",
    ),
    _fault(
        "CUT-REQUEST", "CUT-REQUEST", "Cut asked for by a person", Stop.CUT,
        "the rig moves although somebody wants it still",
        "Look at the rig. Reagent may stand in the bed: flush with solvent before a new start.",
    ),
    _fault(
        "FAULT-CONDUCT", "conduct", "Error inside the sequence", Stop.CUT,
        "the rig is run by a program in an unknown state",
        "Keep the journal and report the error; restart the daemon before a new run.",
    ),
    _fault(
        "FAULT-SCAN", "scan", "Scan late or missed", Stop.CUT,
        "limits are not watched while the computer is busy",
        "Find what slowed the computer (other programs, memory, disk) before a new start.",
    ),
    _fault(
        "FAULT-SUSPEND", "suspend", "The computer was suspended", Stop.CUT,
        "nobody watched the rig for the time of the suspension",
        "Look at the rig. Forbid sleep on this computer before a new start.",
    ),
    _fault(
        "FAULT-GUARD", "guard", "The guard process is gone", Stop.CUT,
        "nothing stops the pumps should this process die as well",
        "Restart the daemon with its guard before a new run.",
    ),
    _fault(
        "FAULT-JOURNAL", "journal", "The journal is not being written", Stop.QUENCH,
        "what happens leaves no record",
        "Free or exchange the disk; then start again.", JOURNAL_S,
    ),
)  # fmt: skip
