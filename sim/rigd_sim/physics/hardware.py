"""Syringes, compliance and closed vessels in closed form. SI; pressures absolute where said."""

from __future__ import annotations

import math


def barrel_area(bore: float) -> float:
    """Piston area [m2]; the flow is area times plunger speed."""
    return math.pi * bore**2 / 4.0


def stall_pressure(force: float, bore: float) -> float:
    """Pressure that a plunger force can make without friction [Pa]."""
    return force / barrel_area(bore)


def dead_head_rate(flow: float, compliance: float) -> float:
    """dP/dt = Q/C of a pump against a closed end [Pa/s]."""
    return flow / compliance


def gas_compliance(volume: float, absolute_pressure: float) -> float:
    """C = V/P of trapped gas, isothermal [m3/Pa]."""
    return volume / absolute_pressure


def time_constant(resistance: float, compliance: float) -> float:
    """tau = R C [s]: how long flow goes on after the pump has stopped."""
    return resistance * compliance


def closed_flask(start_pressure: float, gas_volume: float, flow: float, time: float) -> float:
    """P = P0 V/(V - Q t): absolute pressure in a flask that is not vented (isothermal ideal gas)."""
    return start_pressure * gas_volume / (gas_volume - flow * time)


def screw_turn_time(pitch: float, bore: float, flow: float) -> float:
    """Seconds for one turn of the screw: the period of a pump's ripple."""
    return pitch * barrel_area(bore) / flow
