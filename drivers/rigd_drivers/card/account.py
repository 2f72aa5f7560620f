"""The account of a pump without syringes: what the daemon has ordered to be drawn and what was delivered since."""

from __future__ import annotations

import math

from rigd.model.orders import Action, Order


class Account:
    """The fillings of a pump that draws from its bottle all the time, kept as the daemon orders them."""

    def __init__(self, single: bool) -> None:
        self.level_mL, self.standby_mL = 0.0, 0.0
        self._single, self._delivered_mL = single, math.nan

    def takes(self, order: Order) -> bool:
        """Book a filling or a change-over; ``False`` for orders that the pump itself must carry out."""
        if order.action is Action.FILL and self._single:
            self.level_mL = order.value
        elif order.action is Action.FILL:
            self.standby_mL = order.value
        elif order.action is Action.SWAP:
            self.level_mL, self.standby_mL = self.standby_mL, self.level_mL
        return order.action in (Action.FILL, Action.SWAP)

    def drew(self, delivered_mL: float) -> None:
        """Book what was delivered since the last poll; an empty account goes on with the other one."""
        if delivered_mL > self._delivered_mL:
            self.level_mL -= delivered_mL - self._delivered_mL
        self._delivered_mL = delivered_mL
        if self.level_mL <= 0 < self.standby_mL:
            self.level_mL, self.standby_mL = self.level_mL + self.standby_mL, 0.0
        self.level_mL = max(self.level_mL, 0.0)
