"""Syringe pump with one or two syringes, bracket protocol (manual, 1.1). Nothing here knows another family."""

from rigd_drivers.syringe_pump.driver import FAMILY

__all__ = ["FAMILY"]
