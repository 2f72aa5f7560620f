"""Module for pressures and temperatures, bracket protocol (manual, 1.3). Nothing here knows another family."""

from rigd_drivers.sensor_module.driver import FAMILY

__all__ = ["FAMILY"]
