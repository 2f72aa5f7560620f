"""Strange register maps as cards: triggers, command words, heartbeats, bits, blocks, 4xxxx notation, parameters."""

from __future__ import annotations

import re
import struct
from pathlib import Path

import pytest
from fakes.register_bank import RegisterBank
from pymodbus.client.mixin import ModbusClientMixin

from rigd.model.devices import DeviceSpec, LinkSpec
from rigd.model.errors import ConfigError, DeviceProtocolError, DeviceRefused
from rigd.model.orders import Action, Authority, Order
from rigd_drivers.card import modbus
from rigd_drivers.card.driver import CardDevice

PUMP = """
schema = "rigd-card-1"
title = "a map"
family = "pump"
continuous = true
[link]
protocol = "modbus-tcp"
{link}
[registers]
{registers}
[channels]
flow = {{ read = "flow", scale = 0.001 }}
delivered = {{ integral_of = "flow" }}
state = {{ {state} }}
[orders.deliver]
steps = [{steps}]
[stop]
steps = [{stop}]
check = [{check}]
{more}
"""


def pump(folder: Path, parameters: dict[str, float] | None = None, **parts: str) -> CardDevice:
    said = {"link": "", "more": "", "state": 'read = "channel.flow > 0"'} | parts
    (folder / "p.toml").write_text(PUMP.format(**said), encoding="utf-8")
    options = {"card": str(folder / "p.toml"), "parameters": parameters or {}}
    return CardDevice(DeviceSpec("p", "card", "", "bench", "1", "u", (), options=options))


def order(value: float, action: Action = Action.DELIVER) -> Order:
    return Order(1, "u", action, value, Authority.SEQUENCE, "test", 0)


async def test_trigger_register_in_4xxxx_notation_that_clears_itself(tmp_path: Path) -> None:
    def device(bank: RegisterBank) -> None:
        words = bank.words[3]
        if words[10] in (1, 2):  # the trigger: 1 takes the rate over and runs, 2 halts
            bank.words[4][0] = words[0] if words[10] == 1 else 0
            words[10] = 0

    made = pump(
        tmp_path,
        link="address_base = 40001",
        registers="""rate = { table = "holding", address = 40001 }
trigger = { table = "holding", address = 40011 }
flow = { table = "input", address = 30001 }""",
        steps="""{ write = "rate", scale = 0.001 },
    { write = "trigger", set = 1, verify = false, until = "trigger == 0", within_s = 0.5 }""",
        stop='{ write = "trigger", set = 2 }',
        check='{ read = "flow", equals = [0, 1] }',
    )
    bank = RegisterBank(device)
    await made.execute(bank, order(0.25))
    assert bank.log == [(6, 0, (250,)), (6, 10, (1,))]
    assert [one.value for one in await made.poll(bank, ["flow", "state"])] == [0.25, 1.0]
    will = made.last_will(LinkSpec("bench", ""))
    bank.answer(will.frames[0].request[7:])
    reply = will.check[0].request[:4] + b"\x00\x05\x01" + bank.answer(will.check[0].request[7:])
    assert re.search(will.check[0].good_reply, reply, re.DOTALL)
    assert not re.search(will.check[0].good_reply, reply[:-1] + b"\x02", re.DOTALL)


async def test_command_word_remote_mode_heartbeat_and_fault_bit(tmp_path: Path) -> None:
    made = pump(
        tmp_path,
        registers="""command = { table = "holding", address = 0 }
setpoint = { table = "holding", address = 1, type = "f32", word_order = "low-first" }
beat = { table = "holding", address = 5 }
status = { table = "input", address = 0 }
flow = { table = "input", address = 1, type = "s32" }""",
        state='read = "3 if status & 8 else status & 1"',
        steps='{ write = "setpoint", unit = "uL/min" }, { write = "command", set = "command & 0xFF00 | 3" }',
        stop='{ write = "command", set = 4 }',
        check='{ read = "status", equals = 0 }',
        more="""[[heartbeat]]
write = "beat"
set = "count"
[[prepare]]
write = "command"
set = 0x100
[[require]]
that = "status & 2"
remedy = "turn the key to REMOTE"
[[faults]]
when = "status & 16"
means = "motor hot"
""",
    )
    bank = RegisterBank()
    with pytest.raises(DeviceProtocolError, match="turn the key to REMOTE"):
        await made.prepare(bank)
    bank.words[4][0], bank.words[4][2] = 3, 250
    assert await made.prepare(bank) is False
    await made.execute(bank, order(0.25))
    assert bank.words[3][0] == 0x103
    assert struct.pack(">HH", bank.words[3][2], bank.words[3][1]) == struct.pack(">f", 250.0)
    beats = []
    for _ in range(3):
        await made.poll(bank, ["flow"])
        beats.append(bank.words[3][5])
    assert beats == [1, 2, 3]
    before = bank.exchanges
    assert [one.value for one in await made.poll(bank, ["flow", "state"])] == [0.25, 1.0]
    assert bank.exchanges - before == 3  # one for the neighbouring inputs, two for the heartbeat and its proof
    bank.words[4][0] = 3 | 8 | 16
    assert [(one.value, one.fault) for one in await made.poll(bank, ["state"])] == [(3.0, "motor hot")]
    bank.words[4][0] = 1
    with pytest.raises(DeviceProtocolError, match="REMOTE"):
        await made.poll(bank, ["flow"])


async def test_bits_of_a_word_and_mask_write(tmp_path: Path) -> None:
    made = pump(
        tmp_path,
        registers="""rate = { table = "holding", address = 0, write = "multiple" }
run = { table = "holding", address = 1, bit = 2, write = "mask" }
forward = { table = "holding", address = 1, bit = 9 }
running = { table = "input", address = 7, bit = 9 }
flow = { table = "input", address = 0 }""",
        steps="""{ write = "rate", scale = 0.001, when = "value > 0.0005" },
    { write = "forward", set = 1 }, { write = "run", set = "value > 0" }""",
        stop='{ write = "run", set = 0 }',
        check='{ read = "running", equals = 0 }',
    )
    bank = RegisterBank()
    bank.words[3][1] = 0x8001
    await made.execute(bank, order(0.25))
    assert bank.log == [(16, 0, (250,)), (6, 1, (0x8201,)), (22, 1, (0x8205,))]
    will = made.last_will(LinkSpec("bench", ""))
    assert bank.answer(will.frames[0].request[7:]) in will.frames[0].good_reply.replace(b"\\", b"")
    assert bank.words[3][1] == 0x8201
    good = re.compile(will.check[0].good_reply, re.DOTALL)
    head = will.check[0].request[:4] + b"\x00\x05\x01\x04\x02"
    assert good.search(head + b"\xfd\xff")
    assert not good.search(head + b"\x02\x00")


async def test_block_in_one_message_and_a_scale_that_the_device_tells(tmp_path: Path) -> None:
    made = pump(
        tmp_path,
        {"n": 2},
        registers="""mode = { table = "holding", address = "100 * n" }
rate = { table = "holding", address = "100 * n + 1", type = "u32" }
decimals = { table = "input", address = "100 * n + 9" }
flow = { table = "input", address = "100 * n", type = "s16" }""",
        steps='{ block = { rate = "value * 10 ** decimals", mode = 1 } }',
        stop="{ block = { mode = 0, rate = 0 } }",
        check='{ read = "flow" }',
        more="[parameters]\nn = 1",
    )
    bank = RegisterBank()
    bank.words[4][209] = 4
    await made.execute(bank, order(7.5))
    assert bank.log == [(16, 200, (1, 1, 75000 - 65536))]
    assert made.last_will(LinkSpec("b", "")).frames[0].request[7:] == bytes.fromhex("10 00c8 0003 06 0000 0000 0000")


async def test_a_busy_device_is_asked_again_and_a_clamped_value_is_told(tmp_path: Path) -> None:
    def clamps(bank: RegisterBank) -> None:
        bank.words[3][0] = min(bank.words[3][0], 500)

    made = pump(
        tmp_path,
        link="busy_s = 0.2",
        registers="""rate = { table = "holding", address = 0 }
flow = { table = "input", address = 0 }""",
        steps='{ write = "rate", scale = 0.001 }',
        stop='{ write = "rate", set = 0 }',
        check='{ read = "flow" }',
    )
    bank = RegisterBank(clamps)
    bank.busy = 2
    await made.execute(bank, order(0.25))
    with pytest.raises(DeviceProtocolError, match="1000 was ordered, but rate is 500"):
        await made.execute(bank, order(1.0))
    bank.busy = 10_000
    with pytest.raises(DeviceRefused, match="busy"):
        await made.execute(bank, order(0.25))


async def test_registers_that_are_given_one_by_one_only(tmp_path: Path) -> None:
    made = pump(
        tmp_path,
        registers="""flow = { table = "input", address = 0 }
state = { table = "input", address = 2 }
between = { table = "input", address = 1 }
rate = { table = "holding", address = 0 }""",
        state='read = "state + between"',
        steps='{ write = "rate" }',
        stop='{ write = "rate", set = 0 }',
        check='{ read = "flow" }',
    )

    class Picky(RegisterBank):
        def answer(self, pdu: bytes) -> bytes:
            return b"\x84\x02" if pdu[0] == 4 and pdu[4] > 1 else super().answer(pdu)

    bank = Picky()
    bank.words[4][2] = 1
    for _ in range(2):
        assert [one.value for one in await made.poll(bank, ["state"])] == [1.0]


@pytest.mark.parametrize("order_", ["big", "little"])
@pytest.mark.parametrize(
    ("kind", "theirs", "value"),
    [("u16", "UINT16", 40000), ("s16", "INT16", -5), ("u32", "UINT32", 70000), ("s32", "INT32", -70000),
     ("f32", "FLOAT32", 0.25), ("u64", "UINT64", 2**40), ("s64", "INT64", -(2**40)), ("f64", "FLOAT64", 1e-9)],
)  # fmt: skip
def test_types_and_word_orders_as_another_library_writes_them(
    order_: str, kind: str, theirs: str, value: float
) -> None:
    data_type = getattr(ModbusClientMixin.DATATYPE, theirs)
    words = ModbusClientMixin.convert_to_registers(value, data_type, word_order=order_)  # type: ignore[arg-type]
    place = modbus.Place("holding", 0, kind, low_word_first=order_ == "little")
    body = struct.pack(f">{len(words)}H", *words)
    assert modbus.encode(place, value) == body
    assert modbus.decode(place, body) == value


VALVE = """
schema = "rigd-card-1"
title = "a coil for each position"
family = "valve"
[link]
protocol = "modbus-tcp"
[registers]
c0 = { table = "coil", address = 0 }
c1 = { table = "coil", address = 1, write = "multiple" }
c2 = { table = "coil", address = 2 }
limit = { table = "discrete", address = 4 }
[channels]
position = { READ }
[orders.move]
steps = [
    { write = "c0", set = 0, when = "value != 0" }, { write = "c1", set = 0, when = "value != 1" },
    { write = "c2", set = 0, when = "value != 2" },
    { write = "c0", set = 1, when = "value == 0" }, { write = "c1", set = 1, when = "value == 1" },
    { write = "c2", set = 1, when = "value == 2" },
]
[stop]
steps = [{ write = "c2", set = 0 }, { write = "c1", set = 0 }, { write = "c0", set = 1 }]
check = [{ read = "c0", equals = 1 }]
"""


async def test_a_valve_with_a_coil_for_each_position(tmp_path: Path) -> None:
    feedback = 'read = "-1 if not limit else 0 if c0 and not c1 else 1 if c1 else 2 if c2 else -2"'
    (tmp_path / "v.toml").write_text(VALVE.replace("READ", feedback), encoding="utf-8")
    made = CardDevice(DeviceSpec("v", "card", "", "b", "1", "u", (), options={"card": str(tmp_path / "v.toml")}))
    bank = RegisterBank()
    bank.bits[1][0] = bank.bits[2][4] = 1
    await made.execute(bank, order(1, Action.MOVE))
    assert bank.log == [(5, 0, (0,)), (5, 2, (0,)), (15, 1, (1,))]
    assert (await made.poll(bank, ["position"]))[0].value == 1
    bank.bits[2][4] = 0
    assert (await made.poll(bank, ["position"]))[0].value == -1


async def test_a_valve_without_feedback_is_lost_until_its_first_order(tmp_path: Path) -> None:
    (tmp_path / "v.toml").write_text(VALVE.replace("READ", 'last_order = "move"'), encoding="utf-8")
    made = CardDevice(DeviceSpec("v", "card", "", "b", "1", "u", (), options={"card": str(tmp_path / "v.toml")}))
    bank = RegisterBank()
    assert (await made.poll(bank, ["position"]))[0].value == -2
    await made.execute(bank, order(2, Action.MOVE))
    assert (await made.poll(bank, ["position"]))[0].value == 2


@pytest.mark.parametrize(
    ("registers", "told"),
    [
        ('flow = { table = "input", adress = 0 }', "did you mean 'address'"),
        ('flow = { table = "inputs", address = 0 }', "'inputs'"),
        ('flow = { table = "input", address = 0, type = "bit" }', "bit is for coil and discrete"),
        ('flow = { table = "input", address = "7 +" }', "no expression"),
        ('flow = { table = "input", address = "7 * k" }', "'k' is not declared"),
        ('floww = { table = "input", address = 0 }', "did you mean 'floww'"),
    ],
)
def test_mistakes_name_the_nearest_key(tmp_path: Path, registers: str, told: str) -> None:
    parts = {"steps": '{ write = "rate" }', "stop": '{ write = "rate", set = 0 }', "check": '{ read = "rate" }'}
    with pytest.raises(ConfigError) as caught:
        pump(tmp_path, registers=f'rate = {{ table = "holding", address = 0 }}\n{registers}', **parts)
    assert told in str(caught.value)
    assert caught.value.problems[0].line in (11, 13)  # the register's own line, or the channel that misses it


async def test_what_only_a_move_makes_known_goes_to_rest_at_the_start(tmp_path: Path) -> None:
    (tmp_path / "v.toml").write_text(VALVE.replace("READ", 'last_order = "move"'), encoding="utf-8")
    options, facts = {"card": str(tmp_path / "v.toml")}, {"positions": ("a", "b", "c"), "rest": "b"}
    made, bank = (
        CardDevice(DeviceSpec("v", "card", "", "b", "1", "u", (), options=options, facts=facts)),
        RegisterBank(),
    )
    await made.prepare(bank)
    assert bank.log == [(5, 0, (0,)), (5, 2, (0,)), (15, 1, (1,))]
    assert (await made.poll(bank, ["position"]))[0].value == 1


async def test_a_refusal_names_the_device_and_the_reason(tmp_path: Path) -> None:
    registers = 'rate = { table = "holding", address = 0 }\nflow = { table = "input", address = 7 }'
    parts = {"steps": '{ write = "rate" }', "stop": '{ write = "rate", set = 0 }', "check": '{ read = "flow" }'}
    made, bank = pump(tmp_path, registers=registers, **parts), RegisterBank()
    bank.holes.add(7)
    with pytest.raises(DeviceRefused, match=r"^p: refused: illegal data address$"):
        await made.poll(bank, ["flow"])
