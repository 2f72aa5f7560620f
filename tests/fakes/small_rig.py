"""A rig of three devices on two links with a plant without physics, for tests of servers."""

from __future__ import annotations

from fakes.plain_plant import PlainBath, PlainPlant, PlainPump, PlainValve

from rigd.model.chemistry import Chemistry
from rigd.model.devices import DeviceSpec, LinkSpec
from rigd.model.rig import Chiller, Pump, RigDefinition, Valve
from rigd.ports.plant import FaultKind, PlantMaker


def small_rig() -> RigDefinition:
    """A pump (11) and a valve (21) on ``bus``, a chiller on ``port``."""
    return RigDefinition(
        name="small",
        title="three devices",
        scan_ns=100_000_000,
        chemistry=Chemistry("nothing", (), (), "", ""),
        liquids=(),
        vessels=(),
        pumps=(Pump("P", "pump", 2, 10.3, 5.0, 0.005, 5.0, 8.0, 20.0),),
        valves=(Valve("V", "valve", ("a", "b"), "a", 1.0, 20.0),),
        tees=(),
        columns=(),
        cells=(),
        regulators=(),
        chillers=(Chiller("CH", "chiller", -10.0, 95.0, 20.0),),
        lines=(),
        tags=(),
        interlocks=(),
        alarms=(),
        links=(LinkSpec("bus", "simulated"), LinkSpec("port", "simulated", baud=9600)),
        devices=(
            DeviceSpec("pump", "syringe-pump", "bracket", "bus", "11", "P", ()),
            DeviceSpec("valve", "selector-valve", "bracket", "bus", "21", "V", ()),
            DeviceSpec("chiller", "chiller", "plain", "port", "", "CH", ()),
        ),
    )


def plain_plant(rig: RigDefinition, seed: int) -> PlainPlant:
    """The plant of the small rig."""
    owners = {device.id: device.unit for device in rig.devices}
    return PlainPlant({"P": PlainPump(), "V": PlainValve(), "CH": PlainBath()}, owners)


PLAIN = PlantMaker("plain", plain_plant, lambda: (FaultKind("known", "a fault", "anything", "not used", "none"),))
