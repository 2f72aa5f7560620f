"""Selector valve with 2 to 10 positions, bracket protocol (manual, 1.2). Nothing here knows another family."""

from rigd_drivers.selector_valve.driver import FAMILY

__all__ = ["FAMILY"]
