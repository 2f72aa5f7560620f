"""The table ``[early]`` of a rig file: from when on the early rules warn."""

from typing import Annotated

from pydantic import Field

from rigd.config.quantity import Duration, Quantity
from rigd.config.table import Table
from rigd.model.early import EarlyLimits

Share = Annotated[float, Quantity("fraction", "positive"), Field(ge=0.01, le=0.95)]


class EarlyTable(Table):
    """When the early rules warn. They never stop anything; the limits of the interlocks stand behind them.

    ``resistance_up``, ``resistance_down``: change of a pressure drop against the one learned at the start.
    ``time_left``: a trip that is nearer than this at the present growth. ``compliance_up``, ``compliance_down``:
    measured at each leak test, against the pumps' stated one. ``balance``: less seen than was pumped. ``heat``: a bed
    warmer than bath, room and chemistry can make it.
    """

    resistance_up: Annotated[float, Quantity("fraction", "positive"), Field(ge=0.05, le=100)] = 0.4
    resistance_down: Share = 0.3
    time_left: Duration = 1800.0
    compliance_up: Annotated[float, Quantity("fraction", "positive"), Field(ge=0.05, le=100)] = 1.0
    compliance_down: Share = 0.3
    balance: Share = 0.15
    heat: Annotated[float, Quantity("temperature difference", "positive")] = 2.0

    def value(self) -> EarlyLimits:
        return EarlyLimits(
            resistance_up=self.resistance_up,
            resistance_down=self.resistance_down,
            time_left_s=self.time_left,
            compliance=self.compliance_up,
            stiffer=self.compliance_down,
            balance=self.balance,
            heat_K=self.heat,
        )
