"""What a half of the core wants the rig to be doing now; arbitration turns it into orders.

A demand states targets, not steps: repeated every scan, harmless when already true. Only what cannot be a target
(fill a syringe, change over to the other one) is a ``OneShot``: carried out once per ``ticket``.
A unit that a demand does not name is left as it is.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

from rigd.model.orders import Action, Authority


@dataclass(frozen=True, slots=True)
class OneShot:
    """An order to give once. The same ``ticket`` is never given twice unless the outcome was ``failed``."""

    ticket: str
    action: Action
    value: float


@dataclass(frozen=True, slots=True)
class PumpDemand:
    """Deliver at ``flow_mL_min`` (0: be stopped); ``once`` is a FILL or SWAP to give before that."""

    flow_mL_min: float = 0.0
    once: OneShot | None = None


@dataclass(frozen=True, slots=True)
class BathDemand:
    """Set-point and circulation of a chiller."""

    temperature_degC: float
    circulate: bool = True


@dataclass(frozen=True, slots=True)
class Demand:
    """Targets per unit, with the authority and the rule or phase that speaks."""

    authority: Authority
    source: str
    pumps: Mapping[str, PumpDemand] = field(default_factory=dict)
    valves: Mapping[str, str] = field(default_factory=dict)
    baths: Mapping[str, BathDemand] = field(default_factory=dict)
