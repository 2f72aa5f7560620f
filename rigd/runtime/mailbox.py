"""Orders on their way to one link: two lanes, and only the newest per unit and kind.

House rules. (1) The trip lane (authority of a quench or more, or any STOP) is emptied before the normal lane is
looked at. (2) Within the trip lane, STOPs leave first. (3) A STOP throws away everything that still waits for its
unit in the normal lane: nothing may set it in motion again after the stop. (4) An order never throws away one of the
trip lane unless it is of the trip lane itself.
"""

from __future__ import annotations

import asyncio

from rigd.model.orders import Action, Authority, Order

_Lane = dict[tuple[str, str], Order]


def is_trip(order: Order) -> bool:
    """True for an order of the trip lane."""
    return order.authority >= Authority.QUENCH or order.action is Action.STOP


class Mailbox:
    """Filled by the scan loop, emptied by the one task that owns the link; bounded by the number of units and kinds."""

    def __init__(self) -> None:
        self._trip: _Lane = {}
        self._normal: _Lane = {}
        self.wake = asyncio.Event()

    @property
    def tripping(self) -> bool:
        """True while the trip lane holds something."""
        return bool(self._trip)

    def post(self, order: Order) -> list[Order]:
        """Put an order in; returns those that it makes void."""
        key = _key(order)
        if is_trip(order):
            void = _remove(self._trip, key)
            void += self._remove_unit(order.unit) if order.action is Action.STOP else _remove(self._normal, key)
            self._trip[key] = order
        else:
            void = _remove(self._normal, key)
            self._normal[key] = order
        self.wake.set()
        return void

    def put_back(self, order: Order) -> bool:
        """Put an interrupted normal order in again; False when a newer one has taken its place or a STOP waits."""
        key = _key(order)
        stops = any(unit == order.unit and other.action is Action.STOP for (unit, _), other in self._trip.items())
        if key in self._normal or key in self._trip or stops:
            return False
        self._normal = {key: order, **self._normal}
        return True

    def take_trip(self) -> Order | None:
        """The next order of the trip lane."""
        if not self._trip:
            return None
        stops = (key for key, order in self._trip.items() if order.action is Action.STOP)
        return self._trip.pop(next(stops, next(iter(self._trip))))

    def take_normal(self) -> Order | None:
        """The next order of the normal lane."""
        return self._normal.pop(next(iter(self._normal))) if self._normal else None

    def take_all(self) -> list[Order]:
        """Everything, trip lane first."""
        orders = [*self._trip.values(), *self._normal.values()]
        self._trip.clear()
        self._normal.clear()
        return orders

    def _remove_unit(self, unit: str) -> list[Order]:
        return [self._normal.pop(key) for key in [key for key in self._normal if key[0] == unit]]


def _key(order: Order) -> tuple[str, str]:
    motion = order.action in (Action.DELIVER, Action.STOP)
    return order.unit, "motion" if motion else order.action.value


def _remove(lane: _Lane, key: tuple[str, str]) -> list[Order]:
    return [lane.pop(key)] if key in lane else []
