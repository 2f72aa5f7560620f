"""A circulating bath with finite power and the jackets that it feeds.

    C_b dT_b/dt = P + G_c (T_j - T_b) + G_b (T_room - T_b)           bath (liquid as water), P limited, through a
    heater lag
    C_j dT_j/dt = G_c (T_b - T_j) + G_j (T_room - T_j) - wall heat   jacket of each column; G_c = rho cp q while
    circulating
    P = P_max clip(K e + integral)                                   the thermostat of the bath

Implicit in time, so any step is stable. Conductances and capacities are rounded bench figures (common practice, no
source).
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field

from rigd.model.orders import Action
from rigd.model.rig import Chiller
from rigd_sim.physics.constants import ML_M3, ZERO_CELSIUS_K
from rigd_sim.plant.levers import BathLever

RHO_CP_J_M3_K = 4.17e6
CIRCULATION_W_K = 350.0  # 5 L/min of water
STAGNANT_W_K = 0.3
BATH_LOSS_W_K = 0.6
JACKET_LOSS_W_K = 0.08
JACKET_M3 = 50e-6
HEATER_LAG_S = 15.0
BAND_K = 2.0
INTEGRAL_S = 120.0
POWER_ON_DEGC = 20.0


@dataclass(slots=True)
class BathUnit:
    """State of a chiller and the jackets (by column id) on its circuit; temperatures in K."""

    spec: Chiller
    room_K: float
    jackets: dict[str, float] = field(default_factory=dict)
    bath_K: float = 0.0
    setpoint_degC: float = POWER_ON_DEGC
    running: bool = False
    integral: float = 0.0
    power_W: float = 0.0
    heater_J: float = 0.0
    lost_J: float = 0.0

    def __post_init__(self) -> None:
        self.bath_K = self.room_K

    def tell(self, action: Action, value: float) -> str:
        """Carry out an order; "" or the reason of a refusal."""
        if action is Action.SET_TEMPERATURE:
            if not self.spec.low_degC <= value <= self.spec.high_degC:
                return "value"
            self.setpoint_degC = round(value, 1)
            return ""
        if action is Action.CIRCULATE:
            self.running = value != 0.0
            return ""
        return "word"

    def restart(self) -> None:
        """Power was lost and came back: default set-point, circulation off."""
        self.setpoint_degC, self.running = POWER_ON_DEGC, False

    def circulates(self, lever: BathLever) -> bool:
        """True when liquid really goes round."""
        return self.running and not lever.pump_dead

    def _thermostat(self, dt: float, lever: BathLever) -> float:
        """Power wanted now [W]: proportional and integral on the bath, limited by what heater and compressor can do."""
        if lever.full_heat:
            return self.spec.heating_W
        if not self.running:
            self.integral = 0.0
            return 0.0
        high, low = self.spec.heating_W * lever.heating, -self.spec.cooling_W * lever.cooling
        error = self.setpoint_degC + lever.offset_K + ZERO_CELSIUS_K - self.bath_K
        share = error / BAND_K + self.integral
        span = self.spec.heating_W if share >= 0.0 else self.spec.cooling_W
        wanted = share * span
        if low < wanted < high:
            self.integral += error / BAND_K * dt / INTEGRAL_S
        return min(max(wanted, low), high)

    def advance(self, dt: float, wall_J: dict[str, float], lever: BathLever, room_K: float) -> None:
        """Move on by ``dt``; ``wall_J`` is the heat that each column's wall took out of its jacket in that time."""
        wanted = self._thermostat(dt, lever)
        self.power_W += (wanted - self.power_W) * (1.0 - math.exp(-dt / HEATER_LAG_S))
        link = CIRCULATION_W_K if self.circulates(lever) else STAGNANT_W_K
        c_bath, c_jacket = self.spec.bath_mL * ML_M3 * RHO_CP_J_M3_K, JACKET_M3 * RHO_CP_J_M3_K
        # eliminate the jackets (each sees only bath and room), then solve the bath, all implicit
        diagonal = c_bath / dt + BATH_LOSS_W_K
        rhs = c_bath / dt * self.bath_K + self.power_W + BATH_LOSS_W_K * room_K
        own = {}
        below = c_jacket / dt + link + JACKET_LOSS_W_K
        for column, jacket in self.jackets.items():
            known = c_jacket / dt * jacket + JACKET_LOSS_W_K * room_K - wall_J.get(column, 0.0) / dt
            own[column] = known
            diagonal += link * (1.0 - link / below)
            rhs += link * known / below
        self.bath_K = rhs / diagonal
        self.heater_J += self.power_W * dt
        self.lost_J += BATH_LOSS_W_K * (self.bath_K - room_K) * dt
        for column, known in own.items():
            self.jackets[column] = (known + link * self.bath_K) / below
            self.lost_J += JACKET_LOSS_W_K * (self.jackets[column] - room_K) * dt
