"""Response time of an interlock against its process safety time, from the files alone.

A dead-headed syringe pump raises the pressure by ``dP/dt = Q / C``: Q the flow of all pumps [mL/min], C the compliance
between pumps and block [mL/bar]. The process safety time is what passes between trip limit and weakest rating at that
rate; a response of at most half of it is asked for (ratio: IEC 61508/61511 practice as quoted in public requirement
templates; the sum: common practice, no source). Everything is a worst case of what the files say. It bounds the design,
not the computer: the live daemon's own response is measured, not promised.

Only pressure has a process safety time here; how fast a temperature runs away no file says.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping
from dataclasses import dataclass

from rigd.model.devices import DeviceSpec, LinkSpec
from rigd.model.orders import Stop
from rigd.model.protection import Condition, ConditionKind, Interlock
from rigd.model.recipe import Recipe
from rigd.model.rig import RigDefinition, Tag

BITS_PER_BYTE = 10
EXCHANGE_BYTES = 120
"""Request and reply of one poll or order together. Common practice, no source."""
TURNAROUND_S = 0.05
"""A device's time to answer. Common practice, no source."""
DECIDE_S = 0.005
PUMP_STOP_S = 0.1
"""From the stop order's arrival until the plunger stands. Common practice, no source."""
SHARE = 0.5
"""Largest part of the process safety time that a response may take."""


@dataclass(frozen=True, slots=True)
class Budget:
    """How an interlock's response time [s] adds up."""

    sensor_lag_s: float
    poll_s: float
    exchange_s: float
    delay_s: float
    decide_s: float
    order_s: float
    stop_s: float

    @property
    def total_s(self) -> float:
        """The response time."""
        parts = (self.sensor_lag_s, self.poll_s, self.exchange_s, self.delay_s, self.decide_s, self.order_s)
        return sum(parts) + self.stop_s


@dataclass(frozen=True, slots=True)
class Response:
    """One interlock. ``safety_s`` (process safety time) and ``flow_max_mL_min`` (the largest total flow for which the
    response still takes at most half of it) are ``None`` where the files do not give them."""

    interlock: str
    title: str
    stop: Stop
    budget: Budget
    safety_s: float | None
    flow_max_mL_min: float | None

    @property
    def margin(self) -> float | None:
        """Half the process safety time over the response time: at least 1 is fit."""
        return None if self.safety_s is None else SHARE * self.safety_s / self.budget.total_s

    @property
    def fit(self) -> bool:
        """False only when the margin is known and below 1."""
        return self.margin is None or self.margin >= 1.0


def responses(
    rig: RigDefinition, recipe: Recipe | None = None, measured_mL_bar: float | None = None
) -> tuple[Response, ...]:
    """Every interlock of the rig whose causes are signals. Without a recipe the pumps' largest rates are taken, without
    a measured compliance the pumps' stated ones."""
    flow_mL_min = largest_flow_mL_min(rig, recipe)
    stated = sum(pump.compliance_mL_bar for pump in rig.pumps)
    compliance = stated if measured_mL_bar is None else measured_mL_bar
    return tuple(_response(rig, lock, flow_mL_min, compliance) for lock in rig.interlocks if _signals(rig, lock))


def largest_flow_mL_min(rig: RigDefinition, recipe: Recipe | None = None) -> float:
    """Largest total flow that any phase of the recipe asks for, or that the pumps can give."""
    if recipe is None:
        return sum(pump.rate_max_mL_min for pump in rig.pumps)
    flows = [rig.flush_mL_min, recipe.flush.total_mL_min, *(point.total_mL_min for point in recipe.points)]
    for phase in (recipe.prime, recipe.conditioning, recipe.switchover):
        if phase is not None:
            flows.append(phase.total_mL_min)
    if recipe.leak_test is not None:
        flows.append(recipe.leak_test.fill_mL_min)
    return max(flows)


def _response(rig: RigDefinition, lock: Interlock, flow_mL_min: float, compliance_mL_bar: float) -> Response:
    budget = _budget(rig, lock)
    rise_bar = _room_to_rating_bar(rig, lock)
    if rise_bar is None or compliance_mL_bar <= 0 or flow_mL_min <= 0:
        return Response(lock.id, lock.title, lock.stop, budget, None, None)
    safety_s = rise_bar * compliance_mL_bar / (flow_mL_min / 60.0)
    flow_max = 60.0 * SHARE * rise_bar * compliance_mL_bar / budget.total_s
    return Response(lock.id, lock.title, lock.stop, budget, safety_s, flow_max)


def _signals(rig: RigDefinition, lock: Interlock) -> list[tuple[Condition, Tag]]:
    tags = {tag.id: tag for tag in rig.tags}
    without = (ConditionKind.LINK, ConditionKind.POWER_CYCLED, ConditionKind.FAULT)
    return [(cause, tags[cause.tag]) for cause in lock.causes if cause.kind not in without and cause.tag in tags]


def _room_to_rating_bar(rig: RigDefinition, lock: Interlock) -> float | None:
    """Bar between limit and weakest rating, the smallest over the causes that vote on a high pressure."""
    rooms = []
    for cause, tag in _signals(rig, lock):
        rating = lock.rating or tag.rating
        if cause.kind is ConditionKind.HIGH and tag.measures == "pressure" and rating > 0:
            rooms.append(max(rating - cause.limit, 0.0))
    return min(rooms, default=None)


def _budget(rig: RigDefinition, lock: Interlock) -> Budget:
    """The slowest of the voting signals counts: a vote of two waits for the second."""
    devices = {device.id: device for device in rig.devices}
    links = {link.id: link for link in rig.links}
    found = [tag for _, tag in _signals(rig, lock)]
    return Budget(
        sensor_lag_s=max((tag.lag_s for tag in found), default=0.0),
        poll_s=max((tag.period_ns for tag in found), default=0) / 1e9,
        exchange_s=max((_poll_s(tag, devices, links) for tag in found), default=0.0),
        delay_s=lock.on_delay_ns / 1e9,
        decide_s=DECIDE_S,
        order_s=_order_s(rig.devices, links, {pump.device for pump in rig.pumps}),
        stop_s=PUMP_STOP_S,
    )


def exchange_s(link: LinkSpec) -> float:
    """One request and its reply on a link: bytes at the link's speed plus the device's time to answer [s]."""
    return EXCHANGE_BYTES * BITS_PER_BYTE / link.baud + TURNAROUND_S


def _poll_s(tag: Tag, devices: Mapping[str, DeviceSpec], links: Mapping[str, LinkSpec]) -> float:
    """The tag's own exchange after one that was just begun by another device on the same link."""
    device = devices.get(tag.device)
    if device is None or device.link not in links:
        return 0.0
    shared = sum(other.link == device.link for other in devices.values()) > 1
    return exchange_s(links[device.link]) * (2 if shared else 1)


def _order_s(devices: Iterable[DeviceSpec], links: Mapping[str, LinkSpec], pumps: set[str]) -> float:
    """Until the last pump has its stop order: one exchange in the way, then one per pump on the busiest link."""
    counts: dict[str, int] = {}
    for device in devices:
        if device.id in pumps and device.link in links:
            counts[device.link] = counts.get(device.link, 0) + 1
    return max(((1 + count) * exchange_s(links[link]) for link, count in counts.items()), default=math.nan)
