"""Emulated lines over a plain plant, and a master that lets time pass; written without any driver."""

from __future__ import annotations

from fakes.plain_plant import PlainBath, PlainPlant, PlainPump, PlainValve
from fakes.transcripts import crc16

from rigd.model.devices import VALVE_LOST, DeviceSpec, LinkSpec, PumpState
from rigd.model.rig import Cell, Chiller, Pump, Tag, TagKind, Valve
from rigd.model.samples import Reading
from rigd_sim.emulators.chiller import CirculatingChiller
from rigd_sim.emulators.device import BracketDevice
from rigd_sim.emulators.ir_cell import Grid, IrCell
from rigd_sim.emulators.lines import BracketLine, EmulatedLine, PlainLine
from rigd_sim.emulators.selector_valve import SelectorValve
from rigd_sim.emulators.sensor_module import SensorModule
from rigd_sim.emulators.syringe_pump import SyringePump

TICK_s = 0.05
LINK = LinkSpec("bus", "simulated")


def request(address: str, number: str, words: str) -> bytes:
    """A request of the bracket protocol with its checksum."""
    text = f"{{{address}{number} {words}}}".encode()
    return text + b"%04X\n" % crc16(text)


class Master:
    """Speaks to one line and lets process time pass as a server would."""

    def __init__(self, line: EmulatedLine, plant: PlainPlant) -> None:
        self.line = line
        self.plant = plant
        self.now_s = 0.0
        self._number = 0

    def wait(self, span_s: float) -> bytes:
        """Let time pass; return what came unasked."""
        heard = b""
        for _ in range(max(1, round(span_s / TICK_s))):
            self.now_s = round(self.now_s + TICK_s, 6)
            self.plant.advance(round(self.now_s * 1e9))
            heard += b"".join(data for _, data in self.line.tick(self.now_s))
        return heard

    def send(self, data: bytes) -> bytes:
        """Feed bytes; return all that comes back, in order of its time."""
        return b"".join(data for _, data in sorted(self.line.feed(data, self.now_s), key=lambda sending: sending[0]))

    def ask(self, address: str, words: str) -> str:
        """One exchange under a new number; the words of the reply after address and number, "" for silence."""
        self._number = (self._number + 1) % 256
        number = f"{self._number:02X}"
        reply = self.send(request(address, number, words)).decode("ascii")
        if not reply:
            return ""
        assert reply.startswith(f"({address}{number} "), reply
        return reply[len("(AASS ") : reply.rindex(")")]

    def plain(self, words: str) -> str:
        """One exchange of the plain protocol, "" for silence."""
        return self.send(words.encode() + b"\r").decode("ascii").removesuffix("\r\n")


def spec(device: str, driver: str, address: str, unit: str, serial_no: str = "") -> DeviceSpec:
    """A device of the bracket protocol on the line of these tests."""
    return DeviceSpec(device, driver, "bracket", LINK.id, address, unit, (), serial_no)


def pump_line(given: dict[str, str] | None = None, serial_no: str = "", pace: float = 1.0) -> Master:
    """A line with one pump at address 11, made as a transcript says."""
    facts = given or {}
    unit = PlainPump(
        int(facts.get("syringes", 2)),
        float(facts.get("stroke_mL", 5)),
        level_mL=float(facts.get("level_mL", 5)),
        standby_mL=float(facts.get("standby_mL", 5)),
        state=PumpState.STALLED if facts.get("state") == "stalled" else PumpState.STOPPED,
    )
    plant = PlainPlant({"P": unit}, {"pump": "P"})
    low, high = float(facts.get("rate_min", 0.005)), float(facts.get("rate_max", 5))
    pump = Pump("P", "pump", unit.syringes, float(facts.get("bore_mm", 10.3)), unit.stroke_mL, low, high, 8.0, 20.0)
    device = SyringePump(spec("pump", "syringe-pump", "11", "P", serial_no), plant, pump, pace)
    return Master(BracketLine(LINK, [device], pace), plant)


def valve_line(given: dict[str, str] | None = None, serial_no: str = "") -> Master:
    """A line with one valve at address 21."""
    facts = given or {}
    at = facts.get("at", "1")
    travel_s = float(facts.get("travel_s", 1))
    plant = PlainPlant({"V": PlainValve(VALVE_LOST if at == "?" else int(at) - 1, travel_s)}, {"valve": "V"})
    names = tuple(f"port-{i}" for i in range(int(facts.get("positions", 3))))
    valve = Valve("V", "valve", names, names[0], travel_s, 20.0)
    device = SelectorValve(spec("valve", "selector-valve", "21", "V", serial_no), plant, valve)
    return Master(BracketLine(LINK, [device]), plant)


def sensor_line(given: dict[str, str] | None = None, serial_no: str = "") -> Master:
    """A line with one sensor module at address 31."""
    plant = PlainPlant()
    tags = []
    for channel, text in (given or {"p1": "0.412/10244"}).items():
        value, _, code = text.partition("/")
        known = value not in ("OPEN", "LOW", "HIGH")
        plant.inputs[channel] = (
            Reading(channel, float(value), int(code)) if known else Reading(channel, float("nan"), None, value)
        )
        span = (0.0, 25.0) if channel.startswith("p") else (-50.0, 150.0)
        tags.append(Tag(channel, "", TagKind.MEASURED, "", "", *span, "sensors", channel, 0, 0))
    device = SensorModule(spec("sensors", "sensor-module", "31", "", serial_no), plant, tags)
    return Master(BracketLine(LINK, [device]), plant)


def ir_line(given: dict[str, str] | None = None, serial_no: str = "") -> Master:
    """A line with one IR cell at address 41."""
    facts = given or {}
    every_ns = round(float(facts.get("every_s", 5)) * 1e9)
    grid = float(facts.get("from", 860)), float(facts.get("step", 4))
    plant = PlainPlant(points=int(facts.get("n", 5)), start_per_cm=grid[0], step_per_cm=grid[1], period_ns=every_ns)
    cell = Cell("IR", "ir", 0.04, 25.0, 20.0, every_ns)
    device: BracketDevice = IrCell(spec("ir", "ir-cell", "41", "", serial_no), plant, cell, Grid(plant.points, *grid))
    return Master(BracketLine(LINK, [device]), plant)


def chiller_line(given: dict[str, str] | None = None, serial_no: str = "") -> Master:
    """A line with one chiller."""
    facts = given or {}
    bath = PlainBath(float(facts.get("bath_degC", 22)), low_level=facts.get("low_level") == "1")
    plant = PlainPlant({"CH": bath}, {"chiller": "CH"})
    part = Chiller("CH", "chiller", float(facts.get("low_degC", -10)), float(facts.get("high_degC", 95)), 20.0)
    device = DeviceSpec("chiller", "chiller", "plain", "port", "", "CH", (), serial_no)
    link = LinkSpec("port", "simulated", baud=9600)
    return Master(PlainLine(link, CirculatingChiller(device, plant, part)), plant)


MAKERS = {
    "syringe_pump": pump_line,
    "selector_valve": valve_line,
    "sensor_module": sensor_line,
    "ir_cell": ir_line,
    "chiller": chiller_line,
}
