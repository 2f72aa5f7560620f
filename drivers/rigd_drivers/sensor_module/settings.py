"""Options of a sensor module in the rig file: it needs none; an unknown key is still refused."""

from __future__ import annotations

from rigd_drivers.options import Options


class SensorOptions(Options):
    """None."""
