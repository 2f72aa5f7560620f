"""The account of a pump without syringes: what the daemon has ordered to be drawn and what was delivered since."""

from __future__ import annotations

import math

from rigd.model.orders import Action, Order


class Account:
    """The fillings of a pump that draws from its bottle all the time, kept as the daemon orders them.

    Such a pump delivers what its feed valve stands at, from the moment of the filling on; so what was filled is shown
    as ready for one poll and then as what is delivered now, on top of what was left: a change-over by itself.
    """

    def __init__(self, single: bool, stroke_mL: float = math.inf) -> None:
        self.level_mL, self.standby_mL = 0.0, 0.0
        self._single, self._stroke_mL, self._delivered_mL = single, stroke_mL, math.nan
        self._shown = False

    def takes(self, order: Order) -> bool:
        """Book a filling or a change-over; ``False`` for orders that the pump itself must carry out."""
        if order.action is Action.FILL and self._single:
            self.level_mL = order.value
        elif order.action is Action.FILL:
            self.standby_mL, self._shown = order.value, False
        elif order.action is Action.SWAP:
            self.level_mL, self.standby_mL = self.standby_mL, self.level_mL
        return order.action in (Action.FILL, Action.SWAP)

    def drew(self, delivered_mL: float) -> None:
        """Book what was delivered since the last poll; what was filled before it goes on top of the rest."""
        if delivered_mL > self._delivered_mL:
            self.level_mL = max(self.level_mL - (delivered_mL - self._delivered_mL), 0.0)
        self._delivered_mL = delivered_mL
        if self._shown or self.level_mL <= 0:
            together_mL = self.level_mL + self.standby_mL
            self.level_mL = min(together_mL, self._stroke_mL)
            self.standby_mL = together_mL - self.level_mL
        self._shown = self.standby_mL > 0
