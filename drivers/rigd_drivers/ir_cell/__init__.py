"""In-line IR flow cell, bracket protocol (manual, 1.4). Nothing here knows another family."""

from rigd_drivers.ir_cell.driver import FAMILY

__all__ = ["FAMILY"]
